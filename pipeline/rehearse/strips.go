package rehearse

import (
	"context"
	"encoding/binary"
	"math"

	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/sequence"
)

// strips makes the samples of all frames, strip by strip of raw rows, into the
// scratch file, and the truth's voxels.
func (r *rehearsal) strips(ctx context.Context) error {
	if err := r.prepareViews(ctx); err != nil {
		return err
	}
	height := r.stripHeight()
	for raw0 := 0; raw0 < len(r.detector.rows); raw0 += height {
		raw1 := min(raw0+height, len(r.detector.rows))
		if err := r.strip(ctx, raw0, raw1); err != nil {
			return err
		}
	}
	return nil
}

// Strips of rows: shorter ones waste time on the mirror rows that neighbours
// share, longer ones gain nothing.
const (
	lowestStrip  = 8
	highestStrip = 96
	// mirrorRowsBeside is how many mirror rows reach a detector row, roughly.
	mirrorRowsBeside = 20
)

// stripHeight is how many raw rows fit into the memory.
func (r *rehearsal) stripHeight() int {
	perRow := int64(len(r.steps)) * int64(r.detector.rawColumns) * r.sampleBytes()
	drawnRows := int64(0)
	for i := range r.sources {
		for layer := range layers {
			if r.hasLayer(layer, i) {
				drawnRows += int64(len(r.beams.list))
			}
		}
	}
	perRow += drawnRows * int64(r.optics.columns) * 4
	if r.air != nil { // the sources in each step
		perRow += int64(len(r.steps)) * int64(r.optics.columns) * 4
	}
	if r.truth != nil {
		perRow += 8 * int64(r.optics.profile.Grid.Count) * int64(r.beams.n)
	}
	// The weights of the mirror rows (some 20 reach a row) and the workers' scratch.
	perRow += int64(mirrorRowsBeside+4*r.opts.Workers) * int64(r.optics.axis.n) * 8
	height := int(r.opts.MemoryBytes / 2 / perRow)
	if r.redraws {
		// The light of all beams, objects and sky apart, in all mirror rows.
		perRow = 2 * drawnRows / int64(len(r.sources)) * int64(r.optics.axis.n) * 8
		height = int(r.opts.MemoryBytes/2/perRow) - mirrorRowsBeside
	}
	return min(max(height, lowestStrip), highestStrip)
}

func (r *rehearsal) sampleBytes() int64 {
	if r.opts.Noiseless {
		return 4
	}
	return 2
}

// strip makes the raw rows raw0 <= row < raw1 of all frames.
func (r *rehearsal) strip(ctx context.Context, raw0, raw1 int) error {
	y0, y1 := r.activeRows(raw0, raw1)
	light := &drawn{}
	if y0 < y1 {
		var err error
		if light, err = r.illuminate(ctx, y0, y1); err != nil {
			return err
		}
		if err := r.writeTruth(light); err != nil {
			return err
		}
	}
	// One step's rows follow one another.
	rowBytes := r.detector.rawColumns * int(r.sampleBytes())
	height := raw1 - raw0
	samples := make([]byte, len(r.steps)*height*rowBytes)
	readers := make([]*stepReader, r.opts.Workers)
	err := parallel.Do(ctx, r.opts.Workers, height, func(worker, k int) error {
		if readers[worker] == nil {
			readers[worker] = r.newStepReader()
		}
		return readers[worker].row(ctx, raw0+k, light, func(step int) []byte {
			at := (step*height + k) * rowBytes
			return samples[at : at+rowBytes]
		})
	})
	if err != nil {
		return err
	}
	for step := range r.steps {
		at := (int64(step)*int64(len(r.detector.rows)) + int64(raw0)) * int64(rowBytes)
		if _, err := r.scratch.WriteAt(samples[step*height*rowBytes:(step+1)*height*rowBytes], at); err != nil {
			return err
		}
	}
	r.advance(height)
	return nil
}

// activeRows are the active rows among raw rows; they follow one another.
func (r *rehearsal) activeRows(raw0, raw1 int) (y0, y1 int) {
	y0, y1 = math.MaxInt, -1
	for _, row := range r.detector.rows[raw0:raw1] {
		if row.active >= 0 {
			y0, y1 = min(y0, row.active), max(y1, row.active+1)
		}
	}
	return y0, y1
}

// stepReader reads one raw row of all steps; one serves one goroutine.
type stepReader struct {
	r      *rehearsal
	reader *reader
	mean   []float64
	raw    []float64
	before []float64
}

func (r *rehearsal) newStepReader() *stepReader {
	return &stepReader{
		r: r, reader: r.detector.newReader(),
		mean: make([]float64, r.optics.columns), before: make([]float64, r.optics.columns),
		raw: make([]float64, r.detector.rawColumns),
	}
}

// row reads a raw row of every step in their order, since charge lags from step
// to step, and stores the samples where dst says.
func (s *stepReader) row(ctx context.Context, raw int, light *drawn, dst func(step int) []byte) error {
	r := s.r
	y := r.detector.rows[raw].active
	var response, pattern, leaks []float64
	if y >= 0 {
		response, pattern, leaks = r.detector.response(y), r.detector.pattern(y), r.leaksOn(float64(y))
	}
	clear(s.before)
	full := 0
	for k := range r.steps {
		if k%64 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
		in := &reading{step: k, exptime: r.seq.Steps[k].ExptimeSeconds, offsetE: r.fates[k].offsetE, pattern: pattern, persist: r.persist, before: s.before}
		if y >= 0 {
			s.expect(k, y, light, response, leaks)
			in.hits = hitsOn(r.fates[k].hits, y)
		}
		s.reader.read(s.raw, raw, s.mean, in)
		if r.seq.Steps[k].Kind == sequence.Science {
			full += s.reader.full
		}
		s.store(dst(k))
	}
	r.saturated.Add(int64(full))
	return nil
}

// expect fills mean with the electrons that light makes in row y of step k.
func (s *stepReader) expect(k, y int, light *drawn, response, leaks []float64) {
	r, step := s.r, &s.r.steps[k]
	switch {
	case step.source < 0:
		clear(s.mean)
		return
	case light.sums != nil:
		row := light.sums[k][(y-light.y0)*r.optics.columns:]
		for x := range s.mean {
			s.mean[x] = float64(row[x])
		}
	default:
		mix(s.mean, step.mixture, &light.rows[step.source][y-light.y0], leaks)
		if light.objects != nil && light.objects[k] != nil {
			for x, e := range light.objects[k][(y-light.y0)*r.optics.columns:][:len(s.mean)] {
				s.mean[x] += float64(e)
			}
		}
	}
	for x := range s.mean {
		s.mean[x] *= step.factor * response[x]
	}
}

// leaksOn is what shut beams leak at row y, nil where they do not.
func (r *rehearsal) leaksOn(y float64) []float64 {
	if r.leakSize == 0 {
		return nil
	}
	return r.beams.leaks(r.leakSize, r.leakMap, y, r.optics.rows)
}

// store rounds and clips the raw values to the converter's range, or keeps them
// as float32, in the scratch file's order of bytes (little-endian).
func (s *stepReader) store(dst []byte) {
	if s.r.opts.Noiseless {
		for x, v := range s.raw {
			binary.LittleEndian.PutUint32(dst[4*x:], math.Float32bits(float32(v)))
		}
		return
	}
	for x, v := range s.raw {
		v = math.Floor(v + 0.5)
		if !(v > 0) {
			v = 0
		}
		if v > math.MaxUint16 {
			v = math.MaxUint16
		}
		binary.LittleEndian.PutUint16(dst[2*x:], uint16(v))
	}
}
