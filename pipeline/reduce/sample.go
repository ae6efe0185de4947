package reduce

import (
	"context"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/sequence"
)

// sampler reads pixels of all science frames, some rows at a time, as the strips see
// them.
type sampler struct {
	r      *reduction
	frames []*exposure.Frame // in the order of their steps
	rows   []int             // ascending
	keep   func(i, x, y int) bool
	// offset is taken off each frame.
	offset []float64
}

// sample is the pixels of some rows.
type sample struct {
	pixels []place
	// readings is [frame][pixel]: electrons above bias, dark current and the frame's
	// offset, light that closed mirrors leak included, since it follows the throughput
	// as all light does. A sample that is saturated or without a value is NaN.
	readings [][]float32
	// dark is the charge of the dark current, which has photon noise, off the light
	// of all-off frames in a science exposure and offVariance its variance.
	dark, off, offVariance []float32
	quiet                  []float64 // variance without light
	bias                   []float32
	from                   []int // the first pixel of each row
}

// place is a detector pixel.
type place struct{ x, y int }

// The sample's size. What throughput is measured to depends on the scene and falls
// with the root of the number of pixels: it takes tens of thousands to come to a tenth
// of what a fraction of the noise would show, and more cost time. It does not depend on
// the memory, on which no product may.
const (
	samplePixels = 1 << 16
	// sampleWork bounds v^2 x pixels, summed over the cycles, to a second or so, or to
	// what the strips take as well: an operation a reading.
	sampleWork = 1_500_000_000
	// sampleRows at least are looked at where the detector has them, so that the
	// sample is no single star's.
	sampleRows = 24
	leastPixel = 256
	// chunkSamples is how many readings of all frames are held at the same time, but
	// for a single row: 8 MiB.
	chunkSamples = 1 << 21
)

// codedSampler reads about so many pixels spread evenly over those whose light follows
// the code.
func (r *reduction) codedSampler(offset []float64, want int) *sampler {
	rows := r.codedRows()
	columns := r.camera.Columns
	n := min(len(rows), max(sampleRows, (want+columns-1)/columns))
	stride := max(1, (n*columns+want/2)/want)
	chosen := spreadRuns(rows, n, max(1, n/sampleRows))
	keep := func(i, x, y int) bool { return (x+i)%stride == 0 && r.coded(x, y) }
	return &sampler{r: r, frames: r.scienceFrames(), rows: chosen, keep: keep, offset: offset}
}

// spreadRuns picks n of the rows, or a few less, in runs of so many neighbours, which
// share the rows of overscan around them.
func spreadRuns(rows []int, n, run int) []int {
	var chosen []int
	places := max(1, n/run)
	for i := range places {
		first := i * len(rows) / places
		last := min((i+1)*len(rows)/places, first+run)
		chosen = append(chosen, rows[first:last]...)
	}
	return chosen
}

// scienceFrames are those in use, in the order of their steps.
func (r *reduction) scienceFrames() []*exposure.Frame {
	var frames []*exposure.Frame
	for _, f := range r.album.Frames {
		if r.seq.Steps[f.Step].Kind == sequence.Science {
			frames = append(frames, f)
		}
	}
	return frames
}

// sampleSize is the number of pixels that the work allows.
func (r *reduction) sampleSize() int {
	v, frames := int64(r.seq.V), int64(max(1, r.roles.science))
	cycles := (frames + v - 1) / v
	work := max(sampleWork, frames*int64(r.camera.Columns)*int64(r.camera.Rows))
	return int(max(leastPixel, min(samplePixels, work/(v*v*cycles))))
}

// codedRows are the trace rows that follow the code.
func (r *reduction) codedRows() []int {
	var rows []int
	for y := range r.camera.Rows {
		if slices.Contains(r.usage.row(y), 0) {
			rows = append(rows, y)
		}
	}
	return rows
}

// coded tells whether the trace row that pixel (x, y) belongs to follows the code.
func (r *reduction) coded(x, y int) bool {
	row := int(math.Round(float64(y) - r.optics.geometry.TraceShift(float64(x))))
	return row >= 0 && row < r.camera.Rows && slices.Contains(r.usage.row(row), 0)
}

// each hands the sample to use, chunk by chunk of rows; the chunk's memory is used
// again. Frames are read by several workers; chunks do not depend on them.
func (s *sampler) each(ctx context.Context, use func(*sample) error) error {
	step := max(1, chunkSamples/max(1, len(s.frames)*s.r.camera.Columns))
	chunk := &sample{readings: make([][]float32, len(s.frames))}
	readers := make([]sampleReader, s.r.opts.Workers)
	for first := 0; first < len(s.rows); first += step {
		last := min(first+step, len(s.rows))
		if err := s.choose(chunk, first, last); err != nil {
			return err
		}
		err := parallel.Do(ctx, s.r.opts.Workers, len(s.frames), func(worker, k int) error {
			return s.readFrame(chunk, k, s.rows[first:last], &readers[worker])
		})
		if err != nil {
			return err
		}
		if err := use(chunk); err != nil {
			return err
		}
	}
	s.r.looked.Add(int64(len(s.frames)) * int64(len(s.rows)) * s.r.frameBytes() / int64(max(1, s.r.camera.Rows)))
	return nil
}

// sampleReader is the memory of a worker.
type sampleReader struct {
	block   []float32
	flags   []calib.Flag
	scratch exposure.Scratch
}

// readFrame reads the chosen pixels of a frame.
func (s *sampler) readFrame(chunk *sample, k int, rows []int, reader *sampleReader) error {
	f := s.frames[k]
	dst := slices.Grow(chunk.readings[k][:0], len(chunk.pixels))[:len(chunk.pixels)]
	chunk.readings[k] = dst
	for i := 0; i < len(rows); {
		n := 1
		for i+n < len(rows) && rows[i+n] == rows[i]+n {
			n++
		}
		from, to := chunk.from[i], chunk.from[i+n]
		if from < to {
			if err := s.r.readSampleRun(dst[from:to], chunk.pixels[from:to], f, rows[i], n, reader); err != nil {
				return err
			}
		}
		i += n
	}
	offset := float32(0)
	if s.offset != nil {
		offset = float32(s.offset[f.Step])
	}
	for p := range dst {
		dst[p] -= chunk.bias[p] + chunk.dark[p] + offset
	}
	return s.r.album.Done(f)
}

// readSampleRun reads the pixels of n rows from y0 on of a frame; flagged ones become
// NaN.
func (r *reduction) readSampleRun(dst []float32, pixels []place, f *exposure.Frame, y0, n int, reader *sampleReader) error {
	columns := r.camera.Columns
	reader.block = slices.Grow(reader.block[:0], n*columns)[:n*columns]
	flagged := false
	mark := func(found []calib.Flag, x, y, w int) {
		if !flagged {
			reader.flags = slices.Grow(reader.flags[:0], n*columns)[:n*columns]
			clear(reader.flags)
			flagged = true
		}
		r.camera.Merge(reader.flags, y0, found, x, y, w)
	}
	if _, err := r.camera.Read(reader.block, f.Image, y0, y0+n, &reader.scratch, mark); err != nil {
		return err
	}
	for p, at := range pixels {
		i := (at.y-y0)*columns + at.x
		dst[p] = reader.block[i]
		if flagged && reader.flags[i] != 0 {
			dst[p] = nan32
		}
	}
	return nil
}

// choose picks the pixels of rows first..last-1 of the list, by keep and those that
// the masters call good, and fills in all that the masters say of them.
func (s *sampler) choose(chunk *sample, first, last int) error {
	r := s.r
	*chunk = sample{
		readings: chunk.readings, pixels: chunk.pixels[:0], dark: chunk.dark[:0], off: chunk.off[:0],
		offVariance: chunk.offVariance[:0], quiet: chunk.quiet[:0], bias: chunk.bias[:0], from: chunk.from[:0],
	}
	var masters [masterCount][]float32
	for i := range masters {
		masters[i] = make([]float32, r.camera.Columns)
	}
	seconds := float32(r.roles.calibration.scienceSeconds)
	for i, y := range s.rows[first:last] {
		chunk.from = append(chunk.from, len(chunk.pixels))
		for m := range masters {
			if err := r.masters.images[m].ReadRows(masters[m], y, y+1); err != nil {
				return err
			}
		}
		for x := range r.camera.Columns {
			if masters[masterBad][x] != 0 || !s.keep(first+i, x, y) {
				continue
			}
			chunk.pixels = append(chunk.pixels, place{x, y})
			chunk.bias = append(chunk.bias, masters[masterBias][x])
			chunk.dark = append(chunk.dark, seconds*masters[masterDark][x])
			chunk.off = append(chunk.off, seconds*masters[masterOff][x])
			chunk.offVariance = append(chunk.offVariance, masters[masterVariance][x])
			chunk.quiet = append(chunk.quiet, r.camera.Variance[y][x])
		}
	}
	chunk.from = append(chunk.from, len(chunk.pixels))
	return nil
}

// cycle is one complete set of code rows: which frame of the sample shows each, -1
// where none does.
type cycle struct{ frame []int }

// lost are the rows without a frame.
func (c *cycle) lost() []int {
	var rows []int
	for row, k := range c.frame {
		if k < 0 {
			rows = append(rows, row)
		}
	}
	return rows
}

// cycles sorts the frames, in the order of the cycles.
func (r *reduction) cycles(frames []*exposure.Frame) []*cycle {
	byNumber := map[int]*cycle{}
	var numbers []int
	for k, f := range frames {
		step := r.seq.Steps[f.Step]
		c := byNumber[step.Cycle]
		if c == nil {
			c = &cycle{frame: make([]int, r.seq.V)}
			for row := range c.frame {
				c.frame[row] = -1
			}
			byNumber[step.Cycle] = c
			numbers = append(numbers, step.Cycle)
		}
		c.frame[step.Row] = k
	}
	slices.Sort(numbers)
	all := make([]*cycle, len(numbers))
	for i, n := range numbers {
		all[i] = byNumber[n]
	}
	return all
}

// block puts readings and variances of a cycle into y and s2, [code row][pixel]; a
// row without a frame gets 0 and the mean variance of the others.
func (s *sample) block(c *cycle, photonExcess float64) (y, s2 []float32) {
	n := len(s.pixels)
	y, s2 = make([]float32, len(c.frame)*n), make([]float32, len(c.frame)*n)
	sum := make([]float64, n)
	there := 0
	for row, k := range c.frame {
		if k < 0 {
			continue
		}
		there++
		for p, v := range s.readings[k] {
			variance := float32(s.quiet[p] + (1+photonExcess)*float64(v+s.dark[p]))
			y[row*n+p], s2[row*n+p] = v, variance
			sum[p] += float64(variance)
		}
	}
	for _, row := range c.lost() {
		for p := range n {
			s2[row*n+p] = float32(sum[p] / float64(max(1, there)))
		}
	}
	return y, s2
}
