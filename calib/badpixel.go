package calib

import (
	"fmt"
	"math"
)

// HotRule tells a hot pixel: its dark signal exceeds the median of its neighbours in
// the row (Window on each side) by more than Excess plus Sigmas times the scatter
// of such excesses in the row. A row that is hot from end to end is a level, not a
// hot pixel, and is not found.
type HotRule struct {
	Window int
	Sigmas float64
	Excess float64 // in the dark's units
}

// DefaultHotRule: 8 neighbours on each side; 8 sigmas, which chance reaches in one
// pixel of 1e15. excess keeps a dark whose scatter is 0, as made by no detector,
// from being hot all over: some electrons.
func DefaultHotRule(excess float64) HotRule {
	return HotRule{Window: 8, Sigmas: 8, Excess: excess}
}

// Flag sets BadPixel on the hot pixels of a master dark, rows of width one after the
// other, and returns their number. A pixel that is not a number is bad too.
func (h HotRule) Flag(flags []Flag, dark []float32, width int) (int, error) {
	if err := checkBlock(flags, dark, width); err != nil {
		return 0, err
	}
	n := 0
	excess, scratch := make([]float32, width), make([]float32, width)
	near := make([]float32, 0, 2*h.Window)
	for start := 0; start < len(dark); start += width {
		row := dark[start:][:width]
		for x := range row {
			near = append(near[:0], row[max(x-h.Window, 0):x]...)
			near = append(near, row[x+1:min(x+1+h.Window, width)]...)
			excess[x] = row[x] - medianOrNaN(near)
		}
		_, scatter := RobustLevel(excess, scratch)
		limit := float32(h.Excess + h.Sigmas*scatter)
		for x, e := range excess {
			if !(e <= limit) {
				flags[start+x] |= BadPixel
				n++
			}
		}
	}
	return n, nil
}

// DeadRule tells a dead pixel in a lamp flat: less than Fraction of its surroundings
// along the row, or along the column. Surroundings are the smaller of two medians,
// of the Window pixels before and of those after: at the edge of the slit or of the
// passband one side is dark, and nothing is judged. Nor is where they are below
// Level. So a dead column is found along the row, a dead row along the column, and
// clusters up to half a window wide.
type DeadRule struct {
	Window   int
	Fraction float64
	Level    float64 // in the flat's units
}

// DefaultDeadRule: half of the median of 8 pixels on either side; Level is the
// caller's, for it depends on the lamp: some ten times the flat's noise.
func DefaultDeadRule(level float64) DeadRule {
	return DeadRule{Window: 8, Fraction: 0.5, Level: level}
}

// Flag sets BadPixel on the dead pixels of a lamp flat, rows of width one after the
// other, and returns their number. A pixel that is not a number is bad too. For a
// block of a larger flat, give Window rows more on both sides.
func (d DeadRule) Flag(flags []Flag, flat []float32, width int) (int, error) {
	if err := checkBlock(flags, flat, width); err != nil {
		return 0, err
	}
	n := 0
	side := make([]float32, 0, d.Window)
	for i, v := range flat {
		x, y := i%width, i/width
		dead := v != v ||
			d.below(v, flat[y*width:][:width], x, 1, side) ||
			d.below(v, flat[x:], y, width, side)
		if dead {
			flags[i] |= BadPixel
			n++
		}
	}
	return n, nil
}

// below judges the value v at position at of a line, whose values lie stride apart.
func (d DeadRule) below(v float32, line []float32, at, stride int, side []float32) bool {
	length := (len(line) + stride - 1) / stride
	take := func(from, to int) float64 {
		side = side[:0]
		for i := max(from, 0); i < min(to, length); i++ {
			side = append(side, line[i*stride])
		}
		return float64(medianOrNaN(side))
	}
	// The cheaper tests first: most pixels are above the limit by the brightest of the ones
	// before, and almost all by their median.
	if float64(v) >= d.Fraction*float64(brightest(line, max(at-d.Window, 0), at, stride)) {
		return false
	}
	limit := take(at-d.Window, at)
	if !(limit >= d.Level && float64(v) < d.Fraction*limit) {
		return false
	}
	limit = take(at+1, at+1+d.Window)
	return limit >= d.Level && float64(v) < d.Fraction*limit
}

// brightest of the values from..to-1 of a line, not below 0.
func brightest(line []float32, from, to, stride int) float32 {
	most := float32(0)
	for i := from; i < to; i++ {
		if v := line[i*stride]; v > most {
			most = v
		}
	}
	return most
}

// medianOrNaN leaves out NaN, and is NaN for no value. Reorders v.
func medianOrNaN(v []float32) float32 {
	kept := v[:0]
	for _, x := range v {
		if x == x {
			kept = append(kept, x)
		}
	}
	if len(kept) == 0 {
		return float32(math.NaN())
	}
	return float32(median(kept))
}

func checkBlock(flags []Flag, pixels []float32, width int) error {
	if width < 1 || len(pixels)%width != 0 || len(flags) != len(pixels) {
		return fmt.Errorf("bad pixels: %d pixels and %d flags are not the same whole rows of %d", len(pixels), len(flags), width)
	}
	return nil
}
