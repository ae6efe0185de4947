package audit

import (
	"slices"

	"gonum.org/v1/gonum/mat"
)

// state is a pairing with the throughput that suits it best, and how well both
// agree with the dark columns.
type state struct {
	*engine
	// from is the frame of each code row, none where there is none. erased rows have
	// one which is not believed, or none.
	from   []int
	erased []bool
	// projector is P without the checks that erased rows touch, freedom its rank.
	projector *mat.Dense
	freedom   int
	marks     []mark
	// factor is 1+e by row, sum G and noise N by row after the factors.
	factor []float64
	sum    *mat.Dense
	noise  []float64
	// excess is chi-square less what noise gives, with the price of the factors by
	// their prior; expected is what noise gives.
	excess, expected float64
	product          *mat.Dense // see lit
}

// alike tells whether another state, nil for none, believes the same frames in the same
// rows.
func (s *state) alike(other *state) bool {
	return other != nil && slices.Equal(s.from, other.from) && slices.Equal(s.erased, other.erased)
}

// lit is PG, computed once.
func (s *state) lit() *mat.Dense {
	if s.product == nil {
		s.product = new(mat.Dense)
		s.product.Mul(s.projector, s.sum)
	}
	return s.product
}

// newState judges a pairing without the rows in erased (nil for none). Rows without a
// frame are erased as well. It is nil if the dark columns cannot spare the rows.
func (e *engine) newState(from []int, erased []bool) *state {
	s := e.unfitted(from, erased)
	if s == nil {
		return nil
	}
	s.fit()
	return s
}

// unfitted has factors of 1.
func (e *engine) unfitted(from []int, erased []bool) *state {
	s := &state{engine: e, from: slices.Clone(from), erased: make([]bool, e.v), freedom: e.freedom}
	copy(s.erased, erased)
	var rows []int
	for k, m := range from {
		if m == none {
			s.erased[k] = true
		}
		if s.erased[k] {
			rows = append(rows, k)
		}
	}
	s.projector = e.projector
	if len(rows) > 0 {
		s.projector = mat.DenseCopyOf(e.projector)
		for _, k := range rows {
			if !s.erase(k) {
				return nil
			}
		}
	}
	if s.freedom < 1 {
		return nil
	}
	s.factor = make([]float64, e.v)
	for k := range s.factor {
		s.factor[k] = 1
	}
	s.scale()
	return s
}

// leastSeen is the least part of a row that checks must see to spare it: below, the
// row could not be restored either.
const leastSeen = 1e-6

// mark is P's column of a row when it was erased: the check that restores the row's
// reading from the others.
type mark struct {
	row    int
	checks []float64
}

// erase takes from the projector, which is the state's own, the checks that touch row
// k: P - P_k P_k'/P_kk.
func (s *state) erase(k int) bool {
	own := s.projector.At(k, k)
	if own < leastSeen {
		return false
	}
	checks := slices.Clone(s.projector.RawRowView(k))
	for i, x := range checks {
		if x == 0 {
			continue
		}
		row := s.projector.RawRowView(i)
		for j, y := range checks {
			row[j] -= x * y / own
		}
	}
	for i := range s.v { // zero but for rounding
		s.projector.Set(i, k, 0)
		s.projector.Set(k, i, 0)
	}
	s.marks = append(s.marks, mark{k, checks})
	s.freedom--
	return true
}

// scale fills in sum, noise and excess after the factors.
func (s *state) scale() {
	s.sum, s.noise = mat.NewDense(s.v, s.v, nil), make([]float64, s.v)
	for k, m := range s.from {
		if m == none {
			continue
		}
		row, all := s.sum.RawRowView(k), s.engine.sum.RawRowView(m)
		for i, other := range s.from {
			if other != none {
				row[i] = s.factor[k] * s.factor[i] * all[other]
			}
		}
		s.noise[k] = s.factor[k] * s.factor[k] * s.engine.noise[m]
	}
	s.expected, s.product = 0, nil
	chi2 := 0.0
	for k := range s.v {
		chi2 += dot(s.projector.RawRowView(k), s.sum.RawRowView(k))
		s.expected += s.projector.At(k, k) * s.noise[k]
	}
	s.excess = chi2 - s.expected
}

// scatter is chi-square over what noise gives, 1 or more: errors of the model
// weaken every odds by it.
func (s *state) scatter() float64 {
	if s.expected <= 0 {
		return 1
	}
	return max(1, 1+s.excess/s.expected)
}

func dot(a, b []float64) float64 {
	sum := 0.0
	for i, x := range a {
		sum += float64(x * b[i])
	}
	return sum
}
