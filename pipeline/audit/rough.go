package audit

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// rougher tells the excess of many pairings with given factors of the frames, without
// matrices of their own.
type rougher struct {
	*engine
	sum   *mat.Dense // G and noise after the factors, by frame
	noise []float64
}

// newRougher takes the trend of the frames' brightness off.
func (e *engine) newRougher() *rougher {
	r := &rougher{engine: e, sum: mat.DenseCopyOf(e.sum), noise: make([]float64, e.frames)}
	factor := e.level()
	for m, f := range factor {
		row := r.sum.RawRowView(m)
		for n := range row {
			row[n] *= f * factor[n]
		}
		r.noise[m] = f * f * e.noise[m]
	}
	return r
}

// excess is sum(P * (G[from,from] - noise)), P without the checks that rows without a
// frame touch; +Inf if the dark columns cannot spare those.
func (r *rougher) excess(from []int) float64 {
	var rows, frames []int
	var erased [][]float64
	var own []float64
	for k, m := range from {
		if m != none {
			rows, frames = append(rows, k), append(frames, m)
			continue
		}
		// As state.erase does it, with the erased parts of P kept apart.
		mark := append([]float64(nil), r.projector.RawRowView(k)...)
		for j, other := range erased {
			x := other[k] / own[j]
			for i, y := range other {
				mark[i] -= x * y
			}
		}
		if mark[k] < leastSeen {
			return math.Inf(1)
		}
		erased, own = append(erased, mark), append(own, mark[k])
	}
	if r.freedom <= len(erased) {
		return math.Inf(1)
	}
	excess := r.form(rows, frames, func(k int) []float64 { return r.projector.RawRowView(k) })
	for j, mark := range erased {
		scaled := make([]float64, r.v)
		excess -= r.form(rows, frames, func(k int) []float64 {
			for i, y := range mark {
				scaled[i] = mark[k] * y / own[j]
			}
			return scaled
		})
	}
	return excess
}

// form is sum(M * (G - noise)) over rows in use, M given row by row.
func (r *rougher) form(rows, frames []int, row func(k int) []float64) float64 {
	total := 0.0
	for a, k := range rows {
		m, g := row(k), r.sum.RawRowView(frames[a])
		sum := 0.0
		for b, i := range rows {
			sum += float64(m[i] * g[frames[b]])
		}
		total += sum - m[k]*r.noise[frames[a]]
	}
	return total
}
