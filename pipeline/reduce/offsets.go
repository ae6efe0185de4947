package reduce

import (
	"context"
	"math"
	"slices"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

const (
	// unlitRows are looked at for offsets at most: the level of an amplifier's row is
	// shared by many pixels, so that more of them tell little more.
	unlitRows = 32
	// unlitReach is how many line widths unlit pixels are away from lit rows: a Gaussian
	// has 1e-5 of its light beyond.
	unlitReach = 2
	// leastUnlit pixels make a block.
	leastUnlit = 64
	// offsetSigmas is how far the frames' levels must scatter beyond chance, in standard
	// deviations of their chi-square, to be taken off.
	offsetSigmas = 5
)

// measureOffsets measures each frame's own level, beyond overscan, bias and dark, on
// pixels that no element lights, and puts it into the correction where the levels
// scatter by more than their errors. Pixels of one amplifier at one end of the slit are a
// block; how blocks of a frame differ is the error, which holds that of the overscan.
func (r *reduction) measureOffsets(ctx context.Context, frames []*exposure.Frame) (*product.Measured, error) {
	rows := r.unlitRows()
	if len(rows) == 0 {
		return nil, nil
	}
	rows = spreadRuns(rows, min(unlitRows, len(rows)), max(1, min(8, len(rows))))
	s := &sampler{r: r, frames: frames, rows: rows, keep: func(_, x, y int) bool { return r.unlit(x, y) }}
	sums := make([][]float64, len(frames)) // [frame][block]
	blocks := 2 * len(r.camera.Amplifiers)
	counts := make([][]float64, len(frames))
	for k := range sums {
		sums[k], counts[k] = make([]float64, blocks), make([]float64, blocks)
	}
	err := s.each(ctx, func(chunk *sample) error {
		return parallel.Do(ctx, r.opts.Workers, len(frames), func(_, k int) error {
			values := make([][]float64, blocks)
			for p, at := range chunk.pixels {
				if v := float64(chunk.readings[k][p]); v == v {
					b := r.block(at)
					values[b] = append(values[b], v)
				}
			}
			for b, v := range values {
				sum, n := clippedSum(v, 6*math.Sqrt(r.camera.Variance[0][0]))
				sums[k][b] += sum
				counts[k][b] += n
			}
			return nil
		})
	})
	if err != nil {
		return nil, err
	}
	level, sigma := frameLevels(sums, counts)
	if level == nil {
		return nil, nil
	}
	applied := significantLevels(level, sigma)
	square := 0.0
	for k, f := range frames {
		r.correction.offset[f.Step] = applied[k]
		r.night.Ledger[f.Entry].OffsetE = applied[k]
		square += applied[k] * applied[k] / float64(len(frames))
	}
	return &product.Measured{Value: math.Sqrt(square), Error: sigma}, nil
}

// block is the amplifier of a pixel and the half of the detector it lies in.
func (r *reduction) block(at place) int {
	for i := range r.camera.Amplifiers {
		a := &r.camera.Amplifiers[i].Place
		if at.x >= a.X0 && at.x < a.X0+a.Raw.Width() && at.y >= a.Y0 && at.y < a.Y0+a.Raw.Height() {
			if 2*at.y >= r.camera.Rows {
				return 2*i + 1
			}
			return 2 * i
		}
	}
	return 0
}

// unlitRows are the detector rows with pixels that no element lights.
func (r *reduction) unlitRows() []int {
	var rows []int
	for y := range r.camera.Rows {
		for x := range r.camera.Columns {
			if r.unlit(x, y) {
				rows = append(rows, y)
				break
			}
		}
	}
	return rows
}

// unlit tells whether no mirror that ever opens lies within unlitReach line widths of a
// pixel's trace row.
func (r *reduction) unlit(x, y int) bool {
	row := float64(y) - r.optics.geometry.TraceShift(float64(x))
	reach := unlitReach * r.seq.Profile.Spectrograph.LSFFWHMPx
	first, last := int(math.Floor(row-reach)), int(math.Ceil(row+reach))
	if last < 0 || first >= r.camera.Rows {
		return false // beyond what the usage tells
	}
	for at := max(0, first); at <= min(r.camera.Rows-1, last); at++ {
		for _, f := range r.usage.row(at) {
			if f == 0 || f&product.FlagSentinel != 0 {
				return false
			}
		}
	}
	return true
}

// clippedSum adds up what lies within reach of the median.
func clippedSum(v []float64, reach float64) (sum, n float64) {
	if len(v) == 0 {
		return 0, 0
	}
	sorted := slices.Clone(v)
	slices.Sort(sorted)
	median := sorted[len(sorted)/2]
	for _, x := range v {
		if math.Abs(x-median) <= reach {
			sum += x
			n++
		}
	}
	return sum, n
}

// frameLevels gives the mean over the blocks of each frame, and its error from how the
// blocks differ beyond what they differ in all frames; nil with less than two blocks.
func frameLevels(sums, counts [][]float64) (level []float64, sigma float64) {
	var use []int
	for b := range sums[0] {
		enough := true
		for k := range sums {
			enough = enough && counts[k][b] >= leastUnlit
		}
		if enough {
			use = append(use, b)
		}
	}
	frames, blocks := float64(len(sums)), float64(len(use))
	if len(use) < 2 || len(sums) < 2 {
		return nil, 0
	}
	level = make([]float64, len(sums))
	own := make([]float64, len(sums[0])) // of a block, against the frame's level
	for k := range sums {
		for _, b := range use {
			level[k] += sums[k][b] / counts[k][b] / blocks
		}
		for _, b := range use {
			own[b] += (sums[k][b]/counts[k][b] - level[k]) / frames
		}
	}
	square := 0.0
	for k := range sums {
		for _, b := range use {
			d := sums[k][b]/counts[k][b] - level[k] - own[b]
			square += d * d
		}
	}
	variance := square / ((frames - 1) * (blocks - 1)) // of a block
	return level, math.Sqrt(variance / blocks)
}

// significantLevels gives what is to be taken off: nothing if the levels scatter as
// their error says; else each, drawn to their mean by the error's part of the scatter.
func significantLevels(level []float64, sigma float64) []float64 {
	n := float64(len(level))
	mean, square := 0.0, 0.0
	for _, x := range level {
		mean += x / n
	}
	for _, x := range level {
		square += (x - mean) * (x - mean)
	}
	out := make([]float64, len(level))
	if square <= sigma*sigma*(n-1+offsetSigmas*math.Sqrt(2*(n-1))) {
		return out
	}
	part := 1 - sigma*sigma*(n-1)/square
	for k, x := range level {
		out[k] = mean + part*(x-mean)
	}
	return out
}
