package calib

import (
	"fmt"
	"math"
)

// Overscan estimates the bias level of each row of an amplifier from its overscan
// pixels: the clipped mean of those of the rows within HalfWindow of it. A level so
// smoothed follows a drift along the rows and is 17 times less noisy (in variance,
// at a half window of 8) than the row's own.
type Overscan struct {
	Width      int // overscan pixels a row
	HalfWindow int // rows on each side, fewer at the ends of the block
	Clip       Clip
}

// DefaultOverscan is the rule of the reduction for width pixels a row: 8 rows on
// each side, 4 sigmas, scatter estimated, at least half an ADU.
func DefaultOverscan(width int) Overscan {
	return Overscan{Width: width, HalfWindow: 8, Clip: Clip{Sigmas: 4, Floor: 0.5}}
}

// Levels fills level and variance (ADU, ADU^2: of the level) for len(level)
// consecutive rows. block holds overscan rows, one after the other, of which level[0]
// belongs to number skip: give HalfWindow rows more on both sides, but at the
// detector's ends, and a level does not depend on the strip it is computed in.
//
// The levels of rows closer than 2 HalfWindow + 1 share pixels: their errors are
// correlated, and those of rows farther apart are not.
func (o Overscan) Levels(level, variance []float64, block []float32, skip int) error {
	if o.Width < 1 || len(block)%o.Width != 0 {
		return fmt.Errorf("overscan: %d pixels are not whole rows of %d; check the amplifier's overscan section", len(block), o.Width)
	}
	rows := len(block) / o.Width
	if skip < 0 || skip+len(level) > rows || len(variance) != len(level) {
		return fmt.Errorf("overscan: rows %d to %d are wanted of a block of %d", skip, skip+len(level)-1, rows)
	}
	all := make([]overscanRow, rows)
	for y := range all {
		all[y].look(block[y*o.Width : (y+1)*o.Width])
	}
	w := overscanWindow{clip: o.Clip, r: clippedVariance(o.Clip.Sigmas), scratch: make([]float32, (2*o.HalfWindow+1)*o.Width)}
	for i := range level {
		first := max(skip+i-o.HalfWindow, 0)
		last := min(skip+i+o.HalfWindow, rows-1)
		w.rows, w.values = all[first:last+1], block[first*o.Width:(last+1)*o.Width]
		e := w.mean()
		level[i], variance[i] = e.Mean, e.Variance
	}
	return nil
}

// overscanRow is what the windows that a row is in need to know of it. NaN are left out.
type overscanRow struct {
	moments
	low, high float64
}

func (r *overscanRow) look(values []float32) {
	low, high := float32(math.Inf(1)), float32(math.Inf(-1))
	for _, v := range values {
		if v < low {
			low = v
		}
		if v > high {
			high = v
		}
	}
	r.low, r.high = float64(low), float64(high)
	if low <= high {
		r.moments = momentsWithin(values, r.low, math.Inf(1))
	}
}

// overscanWindow takes Clip.Mean of rows, in less time: values of which none is clipped
// are not looked at again, as their rows' moments add up.
type overscanWindow struct {
	clip    Clip
	r       float64 // clippedVariance
	rows    []overscanRow
	values  []float32
	scratch []float32
}

func (w *overscanWindow) mean() Estimate {
	whole, low, high := w.whole()
	if whole.n < len(w.values) || whole.n < 5 || w.clip.Noise != 0 {
		return w.clip.Mean(w.values, w.scratch)
	}
	step, n := thinning(len(w.values))
	sample := w.scratch[:0]
	for i := range n {
		sample = append(sample, w.values[i*step])
	}
	centre, deviation := medians(sample)
	return w.clip.settle(centre, w.clip.firstNoise(deviation, n), w.r, func(centre, limit float64) moments {
		if centre-low <= limit && high-centre <= limit {
			return whole
		}
		return momentsWithin(w.values, centre, limit)
	})
}

// whole are the moments of all values, those of the rows put together, and their bounds.
func (w *overscanWindow) whole() (all moments, low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for i := range w.rows {
		r := &w.rows[i]
		all.n += r.n
		all.mean += float64(r.n) * r.mean
		if r.low < low {
			low = r.low
		}
		if r.high > high {
			high = r.high
		}
	}
	if all.n == 0 {
		return all, low, high
	}
	all.mean /= float64(all.n)
	square := 0.0
	for i := range w.rows {
		r := &w.rows[i]
		if r.n == 0 {
			continue
		}
		off := r.mean - all.mean
		square += float64(r.n) * off * off
		if r.n > 1 {
			square += r.variance * float64(r.n-1)
		}
	}
	all.variance = square / float64(max(1, all.n-1))
	return all, low, high
}
