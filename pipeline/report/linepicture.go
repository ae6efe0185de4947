package report

import (
	"context"
	"fmt"
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

const (
	mostLines = 3
	// A picture of a line is the mean of so many planes at most, less that of planes beside.
	mostLinePlanes   = 5
	mostBesidePlanes = 3 // on each side
)

// lineWindow is a line to be drawn: planes, both inclusive.
type lineWindow struct {
	name        string
	first, last int
}

// lineWindows are the lines that the forecast wants, and then the strongest that were found.
func lineWindows(f *product.Forecast, s *survey, grid instrument.Grid, planes int) []lineWindow {
	var all []lineWindow
	overlaps := func(first, last int) bool {
		for _, w := range all {
			if first <= w.last+1 && last >= w.first-1 {
				return true
			}
		}
		return false
	}
	if f != nil {
		for _, w := range f.Wanted {
			first, last := planesOf(grid, planes, w.FromNM, w.ToNM)
			if len(all) < mostLines && first <= last && last-first < 3*farReach && w.ToNM > w.FromNM && !overlaps(first, last) {
				middle := (first + last) / 2
				all = append(all, lineWindow{fmt.Sprintf("%s, wanted by the target", w.Name), max(first, middle-mostLinePlanes/2), min(last, middle+mostLinePlanes/2)})
			}
		}
	}
	for _, l := range peaks(s.excess, s.limit, mostLines) {
		if len(all) < mostLines && !overlaps(l-1, l+1) {
			all = append(all, lineWindow{"found as the wavelength where the field differs most from its neighbours", max(0, l-1), min(planes-1, l+1)})
		}
	}
	return all
}

// planesOf are the planes within a band; the first is behind the last for none.
func planesOf(grid instrument.Grid, planes int, fromNM, toNM float64) (first, last int) {
	first, last = planes, -1
	for l := range planes {
		if nm := grid.WavelengthNM(float64(l)); nm >= fromNM && nm <= toNM {
			first, last = min(first, l), max(last, l)
		}
	}
	return first, last
}

// beside are planes on both sides of a line that hold no line themselves.
func (w lineWindow) beside(s *survey, planes int) []int {
	var all []int
	for _, side := range []int{-1, 1} {
		at, n := w.last+nearReach, 0
		if side < 0 {
			at = w.first - nearReach
		}
		for ; at >= 0 && at < planes && n < mostBesidePlanes && max(at-w.last, w.first-at) <= 4*farReach; at += side {
			if s.excess[at] < s.limit {
				all = append(all, at)
				n++
			}
		}
	}
	return all
}

// linePicture is the light of a line over that beside it, by place; NaN where either is not
// known.
func (c *cube) linePicture(ctx context.Context, w lineWindow, s *survey) ([]float64, error) {
	var on []int
	for l := w.first; l <= w.last; l++ {
		on = append(on, l)
	}
	line, err := c.meanOf(ctx, on)
	if err != nil {
		return nil, err
	}
	beside := w.beside(s, c.signal.Planes())
	if len(beside) == 0 {
		return line, nil
	}
	rest, err := c.meanOf(ctx, beside)
	if err != nil {
		return nil, err
	}
	for i := range line {
		line[i] -= rest[i]
	}
	return line, nil
}

// meanOf is the mean over planes of the voxels that are good, by place.
func (c *cube) meanOf(ctx context.Context, planes []int) ([]float64, error) {
	n, width := c.elements()*c.rows(), c.elements()
	sum, good := make([]float64, n), make([]int, n)
	piece := min(max(1, pieceVoxels/width), c.rows())
	signal, flags := make([]float32, piece*width), make([]float32, piece*width)
	for _, l := range planes {
		for y := 0; y < c.rows(); y += piece {
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			end := min(y+piece, c.rows())
			s, f := signal[:(end-y)*width], flags[:(end-y)*width]
			if err := c.signal.ReadPlaneRows(s, l, y, end); err != nil {
				return nil, err
			}
			if err := c.flags.ReadPlaneRows(f, l, y, end); err != nil {
				return nil, err
			}
			for i, v := range s {
				if int16(f[i])&c.bad == 0 && v == v {
					sum[y*width+i] += float64(v)
					good[y*width+i]++
				}
			}
		}
	}
	for i, k := range good {
		sum[i] /= float64(k) // NaN for 0/0
	}
	return sum, nil
}

// words describe the planes of a line.
func (w lineWindow) words(grid instrument.Grid) string {
	from, to := grid.WavelengthNM(float64(w.first)-0.5), grid.WavelengthNM(float64(w.last)+0.5)
	return fmt.Sprintf("%.2f to %.2f nm", math.Min(from, to), math.Max(from, to))
}
