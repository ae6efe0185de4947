package reduce

import (
	"reflect"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/register"
)

// A field that is added to what an interrupted run must get back is either kept
// (prepared.go, journal.go) or made anew from what is; then it is listed here.
func TestEveryFieldIsKeptOrMadeAnew(t *testing.T) {
	for _, c := range []struct {
		of          reflect.Type
		kept, again []string
	}{
		{reflect.TypeFor[reduction](),
			[]string{"night", "correction", "schema", "shift", "optics", "through", "report", "badPixels", "stages"},
			// Read or opened again; set by strips and what follows them; of this run alone.
			[]string{
				"seq", "camera", "album", "roles", "masters", "usage",
				"cube", "element", "shape", "rectifier", "quality", "samples", "stars", "onSky", "reached",
				"opts", "log", "looked", "traffic", "light", "unsynced", "dependence", "state", "resumed",
			}},
		{reflect.TypeFor[roles](), []string{"degraded", "warnings"}, []string{"calibration", "arcs", "refstars", "slots", "science", "lost", "missing"}},
		{reflect.TypeFor[optics](), []string{"geometry", "nominalWave", "noFlat", "darkAmplifiers", "arcs", "trace", "pixel", "response", "neighbour", "leak"}, []string{"stuck"}},
		{reflect.TypeFor[correction](), []string{"offset", "factor", "variance", "leak", "terms"}, nil},
		{reflect.TypeFor[terms](), []string{"tables", "e", "variance"}, []string{"decoder", "elements", "geometry"}},
		{reflect.TypeFor[termTable](), []string{"first", "values"}, nil},
		{reflect.TypeFor[throughput](), []string{"minutes", "belief", "c", "err", "corrected", "curves", "report"},
			[]string{"frames", "times", "outside", "dark", "found"}}, // needed no more
		{reflect.TypeFor[starSearch](), []string{"picture"}, []string{"list", "report"}},
		{reflect.TypeFor[register.Picture](), []string{"Light", "Variance", "count"}, []string{"Elements", "Rows"}},
		{reflect.TypeFor[exposure.Frame](), []string{"Saturated"}, []string{"Name", "Step", "Entry", "Image", "file"}},
		{reflect.TypeFor[sweep](), []string{"quality", "samples", "steps", "finished", "nextOut"},
			[]string{
				"shape", "heights", "reader", "decoder", "rectify", "sink", "elements", "pixel", "light", "pixelVariance", "stuck", "workers", "progress",
				"before", "boundary", "window", "scratch", "fills", "planes", "outs",
			}},
		{reflect.TypeFor[rectifier](), []string{"added"},
			[]string{"geometry", "edges", "voxels", "shift", "columns", "usage", "elements", "uniform", "response", "pixelVariance", "scaled", "low", "byElement", "workers", "field", "group"}},
		{reflect.TypeFor[rowQuality](), []string{"dark", "good", "covered", "wanted", "flags", "flagged", "pulls", "saturated", "restored", "hits", "doubtful", "scale"}, nil},
		{reflect.TypeFor[darkChi2](), []string{"square", "variance", "terms"}, nil},
		{reflect.TypeFor[rowScale](), []string{"all", "most", "applied", "coarse"}, nil},
		{reflect.TypeFor[scaleSum](), []string{"sum", "n"}, nil},
		{reflect.TypeFor[stepChi2](), []string{"square", "noise"}, nil},
		{reflect.TypeFor[restoredSamples](), []string{"list", "left"}, nil},
		{reflect.TypeFor[restoredSample](), []string{"column", "line", "row"}, nil},
	} {
		var have []string
		for i := range c.of.NumField() {
			have = append(have, c.of.Field(i).Name)
		}
		require.ElementsMatch(t, have, slices.Concat(c.kept, c.again), "%v", c.of)
	}
}

// Whatever the bytes of a record, it follows the strips before it or is refused, and then
// nothing has changed.
func FuzzStripRecord(f *testing.F) {
	newSweep := func() (*reduction, *sweep) {
		r := &reduction{}
		w := &sweep{shape: shape{rows: 6, elements: 9, slots: 3}, rectify: &rectifier{added: make([]float32, 6*9)}}
		w.reader = &stripReader{tally: newTally([][]*exposure.Frame{{{}}, {{}}, nil})}
		w.clear()
		return r, w
	}
	r, w := newSweep()
	w.quality[0].good, w.quality[1].hits = 7, 3
	w.samples.list = []restoredSample{{1, 2, 3}}
	w.reader.tally.frames[1].Saturated = 5
	w.finished = 1
	at := r.mark(w, 2, writtenVoxels{rows: 1})
	seed, err := r.record(w, &mark{}, &at)
	require.NoError(f, err)
	f.Add(seed[4:])
	f.Fuzz(func(t *testing.T, data []byte) {
		var s stripRecord
		if decodeRecord(append(slices.Clone(seed[:4]), data...), &s) != nil {
			return
		}
		r, w := newSweep()
		var m mark
		if !r.take(w, &m, &s) {
			_, fresh := newSweep()
			require.Equal(t, fresh.quality, w.quality)
			require.Equal(t, fresh.samples, w.samples)
			require.Equal(t, fresh.rectify.added, w.rectify.added)
			require.Equal(t, mark{}, m)
			return
		}
		require.Positive(t, m.decoded)
		require.LessOrEqual(t, m.decoded, 6)
		require.Len(t, m.saturated, 2)
	})
}
