package forecast

import "math"

// traced says how a pixel lies among the trace rows: what it holds is a cubic of what rows
// q, q+1, q+2, q+3 do, by Lagrange's weights. Light varies over rows as a Gaussian of FWHM
// 3 px or more.
type traced struct {
	q      int // of a pixel in row 0
	weight [4]float64
}

// newTraced is that of a column whose trace has left its row by so much.
func newTraced(shift float64) traced {
	low := math.Floor(-shift)
	p := -shift - low
	return traced{int(low) - 1, [4]float64{-p * (p - 1) * (p - 2) / 6, (p + 1) * (p - 1) * (p - 2) / 2, -(p + 1) * p * (p - 2) / 2, (p + 1) * p * (p - 1) / 6}}
}

// untrace writes what the pixels x0, x0+1, ... of detector row y hold of light that is given
// by trace row, from column x0 on.
func (l *Light) untrace(dst []float64, x0, y int, row func(q int) []float64) {
	var rows [4][]float64
	last := math.MinInt
	for i := range dst {
		t := &l.traces[x0+i]
		if t.q != last {
			last = t.q
			for k := range rows {
				rows[k] = row(y + t.q + k)
			}
		}
		dst[i] = t.weight[0]*rows[0][i] + t.weight[1]*rows[1][i] + t.weight[2]*rows[2][i] + t.weight[3]*rows[3][i]
	}
}

// pixelRow is the light of a detector row, as rowLight is that of a trace row.
type pixelRow struct{ overlap, leak []float64 }

func (f *fieldLight) pixelRow(y int) *pixelRow {
	if r := f.pixelRows[y]; r != nil {
		return r
	}
	n := f.light.camera.columns
	r := &pixelRow{make([]float64, n), make([]float64, n)}
	f.light.untrace(r.overlap, 0, y, func(q int) []float64 { return f.row(q).overlap })
	f.light.untrace(r.leak, 0, y, func(q int) []float64 { return f.row(q).leak })
	f.pixelRows[y] = r
	return r
}

// squaresOf is the sum of the squares of a candidate's elements' light on a trace row, electrons
// a second squared by column.
func (f *fieldLight) squaresOf(q int, c Candidate) []float64 {
	if sum := f.squares[q]; sum != nil {
		return sum
	}
	n := f.light.camera.columns
	sum, light := make([]float64, n), make([]float64, n)
	for j := range c.N {
		clear(light)
		f.element(light, j, q, 0, func(int) bool { return true }, false)
		for i, v := range light {
			sum[i] += v * v
		}
	}
	f.squares[q] = sum
	return sum
}
