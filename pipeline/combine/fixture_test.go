package combine

import (
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// fake is a run as reduce might have written it, with voxels drawn at random.
type fake struct {
	dir              string
	schema           product.Schema
	unit             string
	primary          product.Provenance
	dwell            float64
	exit             int
	warnings         []string
	chi2             *float64        // of the dark columns
	cards            []fitsutil.Card // of SIGNAL
	signal, variance []float32
	flags            []int16
	scale            []float32
}

const fakeRotang = 37

// newFake has its first voxel at element j, row y of the field that begins at 0, 0, turned
// by fakeRotang.
func newFake(rng *rand.Rand, dir string, j, y float64, elements, rows int) *fake {
	f := &fake{dir: dir, unit: product.UnitSignal, dwell: 90, primary: product.Provenance{ProfileName: "tiny", ProfileSHA: "p", SequenceSHA: "s", RecipeSHA: "r", FramesUsed: 15}}
	origin := product.Schema{
		Elements: elements, Rows: rows, Grid: instrument.Grid{FirstNM: 500, StepNM: 0.5, Count: 3}, RADeg: 123.3, DecDeg: 21.6, RowCenter: 4.25,
		RotangDeg: fakeRotang, Parity: 1, C1Deg: 0.6 / 3600, C2Deg: 0.28 / 3600, Object: "field",
	}
	f.schema = origin
	f.schema.RADeg, f.schema.DecDeg = origin.Sky(float64(elements-1)/2+j, 4.25+y)
	n := elements * rows * 3
	for range n {
		x, v, q, b := 100*rng.NormFloat64(), 1+9*rng.Float64(), 0.5+rng.Float64(), int16(0)
		switch rng.IntN(8) {
		case 0:
			x, v, b = math.NaN(), math.NaN(), product.FlagNoData
		case 1:
			b = product.FlagBadPixel
		case 2:
			b = product.FlagRestored
		case 3:
			b = product.FlagPartial | product.FlagSkyLine
		}
		f.signal, f.variance = append(f.signal, float32(x)), append(f.variance, float32(v))
		f.scale, f.flags = append(f.scale, float32(q)), append(f.flags, b)
	}
	return f
}

func (f *fake) write(t require.TestingT) {
	require.NoError(t, os.MkdirAll(f.dir, 0o755))
	specs, err := f.schema.Images()
	require.NoError(t, err)
	for i, spec := range specs {
		if i < 2 {
			require.NoError(t, spec.Header.Set("BUNIT", []string{f.unit, "ct2"}[i], ""))
		}
		for _, c := range f.cards {
			require.NoError(t, spec.Header.Set(c.Key, c.Value, c.Comment))
		}
	}
	primary, err := f.primary.Primary(f.schema.Object)
	require.NoError(t, err)
	c, err := fitsutil.CreateCube(filepath.Join(f.dir, product.CubeFile), primary, specs)
	require.NoError(t, err)
	for i, data := range []any{f.signal, f.variance, f.flags, f.scale} {
		require.NoError(t, c.WriteStrip(i, 0, f.schema.Rows, 0, f.schema.Grid.Count, data))
	}
	e := product.NewEntry(1)
	e.File, e.Kind, e.Verdict, e.ExptimeS = "f00001.fits", string(sequence.Science), product.OK, f.dwell
	l := product.Ledger{e}
	require.NoError(t, c.AppendTable(l.Table()))
	require.NoError(t, c.Commit())
	require.NoError(t, fitsutil.WriteAtomic(filepath.Join(f.dir, product.LedgerFile), l.WriteCSV))
	run := product.Run{Schema: product.RunSchema, Settings: map[string]any{"night": f.dir}, Exit: f.exit, Warnings: f.warnings, Quality: product.Quality{DarkChi2Heldout: f.chi2}}
	require.NoError(t, fitsutil.WriteAtomic(filepath.Join(f.dir, product.RunFile), run.Write))
}

// at is the index of a voxel that the fake has.
func (f *fake) at(j, y, l int) (i int, there bool) {
	there = j >= 0 && j < f.schema.Elements && y >= 0 && y < f.schema.Rows
	return (l*f.schema.Rows+y)*f.schema.Elements + j, there
}

// readFake reads a combined cube's images.
func readFake(t testing.TB, dir string) *fake {
	f, err := fitsutil.Open(filepath.Join(dir, product.CubeFile))
	require.NoError(t, err)
	defer f.Close() // only read from
	out := new(fake)
	im, err := f.ImageNamed(product.Signal)
	require.NoError(t, err)
	out.schema, err = product.ReadSchema(im.Header, im.Axes)
	require.NoError(t, err)
	n := out.schema.Elements * out.schema.Rows
	for k, name := range imageNames {
		im, err := f.ImageNamed(name)
		require.NoError(t, err)
		all := make([]float32, n*im.Planes())
		for l := range im.Planes() {
			require.NoError(t, im.ReadPlaneRows(all[l*n:(l+1)*n], l, 0, out.schema.Rows))
		}
		switch k {
		case 0:
			out.signal = all
		case 1:
			out.variance = all
		case 3:
			out.scale = all
		default:
			for _, v := range all {
				out.flags = append(out.flags, int16(v))
			}
		}
	}
	return out
}
