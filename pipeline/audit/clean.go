package audit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
)

// rowData keeps a row's samples, so that some can be left out later.
type rowData struct {
	y, s2  []float32 // [frame][sample]
	n      int
	floor  float64
	struck []bool // by sample
}

// gram sums the samples that are not struck.
func (d *rowData) gram(frames int) (*hadamard.Gram, []float64) {
	y, s2, n := d.y, d.s2, d.n
	if slices.Contains(d.struck, true) {
		y, s2, n = make([]float32, len(d.y)), make([]float32, len(d.s2)), 0
		for p, off := range d.struck {
			if off {
				continue
			}
			for m := range frames {
				y[m*d.n+n], s2[m*d.n+n] = d.y[m*d.n+p], d.s2[m*d.n+p]
			}
			n++
		}
	}
	g, level := hadamard.NewGram(frames), make([]float64, frames)
	g.Add(y, s2, n, d.n, float32(d.floor))
	for p, scale := range d.scales(s2, n) {
		for m := range frames {
			level[m] += float64(y[m*d.n+p]) * scale
		}
	}
	return g, level
}

// scales are 1/s of n samples, s^2 the mean of a sample's variances s2, as Gram weighs it.
func (d *rowData) scales(s2 []float32, n int) []float64 {
	scale := make([]float64, n)
	if d.n == 0 {
		return scale
	}
	frames := len(s2) / d.n
	for m := range frames {
		for p, v := range s2[m*d.n : m*d.n+n] {
			scale[p] += float64(v)
		}
	}
	for p, sum := range scale {
		scale[p] = 1 / math.Sqrt(max(sum/float64(frames), d.floor))
	}
	return scale
}

// A reading is a hit that no look at its pixel told if its check is off by more than
// hitSquare of its variance, and hitSpans times what is common in its frame at its
// brightness: a frame of a wrong mask is off everywhere.
const (
	hitSquare = 30
	hitSpans  = 30
	// calm is the upper quartile of chi-square of one degree of freedom, with room.
	calm = 1.6
	// ruleSamples are enough to tell what is common; the first rows spread evenly over
	// the detector.
	ruleSamples = 1 << 12
)

// hitRule tells hits under the pairing and the factors of a state.
type hitRule struct {
	*state
	basis *mat.Dense // L with LL' = P: L'y are the checks
	// alone gives each erased row with a frame the check that it has if it alone is not
	// erased; nil for others. A frame that was only hit would else never be cleaned.
	alone [][]float64
	own   []float64 // the variance of each row's check
	// common is what a code row's checks are beyond noise, at brightness 1; +Inf for
	// rows that no check sees.
	common []float64
}

// rule learns what is common from the first rows.
func (s *sampler) rule(st *state) *hitRule {
	r := &hitRule{state: st, basis: basis(st.projector, st.freedom), alone: make([][]float64, st.v), own: make([]float64, st.v), common: make([]float64, st.v)}
	for k, m := range st.from {
		r.own[k] = st.projector.At(k, k)
		if m == none || !st.erased[k] {
			continue
		}
		erased := slices.Clone(st.erased)
		erased[k] = false
		if with := st.unfitted(st.from, erased); with != nil {
			r.alone[k] = with.projector.RawRowView(k)
			r.own[k] = r.alone[k][k]
		}
	}
	squares := make([][]float64, st.v)
	var bright []float64
	for _, d := range s.data {
		if len(bright) >= ruleSamples {
			break
		}
		checks, b := r.checks(d)
		bright = append(bright, b...)
		for k := range st.v {
			own := r.own[k]
			if own <= leastSeen {
				continue
			}
			for p, off := range d.struck {
				if !off {
					x := checks.At(k, p)
					squares[k] = append(squares[k], x*x/own)
				}
			}
		}
	}
	typical := max(median(bright), 1)
	for k, list := range squares {
		r.common[k] = math.Inf(1)
		if len(list) > 0 {
			r.common[k] = max(0, nth(list, len(list)*3/4)-calm) / typical
		}
	}
	return r
}

// checks gives each reading's part in what the dark columns show, a row a code row, and
// each sample's brightness.
func (r *hitRule) checks(d *rowData) (checks *mat.Dense, bright []float64) {
	bright = make([]float64, d.n)
	if d.n == 0 {
		return nil, bright
	}
	y, scale := mat.NewDense(r.v, d.n, nil), d.scales(d.s2, d.n)
	for k, m := range r.from {
		if m == none {
			continue
		}
		row := y.RawRowView(k)
		for p, v := range d.y[m*d.n : (m+1)*d.n] {
			row[p] = r.factor[k] * float64(v) * scale[p]
			bright[p] += row[p] / float64(r.v)
		}
	}
	for p, mean := range bright {
		bright[p] = 1 + mean*mean
	}
	var seen mat.Dense
	seen.Mul(r.basis.T(), y)
	checks = mat.NewDense(r.v, d.n, nil)
	checks.Mul(r.basis, &seen)
	for k, alone := range r.alone {
		if alone != nil {
			mat.NewDense(1, d.n, checks.RawRowView(k)).Mul(mat.NewDense(1, r.v, alone), y)
		}
	}
	return checks, bright
}

// strike marks a row's samples with hits, and gives their number.
func (r *hitRule) strike(d *rowData) (found int) {
	checks, bright := r.checks(d)
	for k, common := range r.common {
		if math.IsInf(common, 1) || d.n == 0 {
			continue
		}
		own := r.own[k]
		for p, x := range checks.RawRowView(k) {
			if !d.struck[p] && x*x > own*(hitSquare+hitSpans*common*bright[p]) {
				d.struck[p] = true
				found++
			}
		}
	}
	return found
}

// basis is L, of so many columns, with LL' = P: Cholesky's factor of a projector, pivot
// by pivot (a rank revealing one, Higham 1990, in Reliable Numerical Computation, 161).
func basis(p *mat.Dense, rank int) *mat.Dense {
	v, _ := p.Dims()
	l := mat.NewDense(v, rank, nil)
	left := make([]float64, v) // the diagonal of what is left of P
	for k := range left {
		left[k] = p.At(k, k)
	}
	for c := range rank {
		pivot := 0
		for k, x := range left {
			if x > left[pivot] {
				pivot = k
			}
		}
		if left[pivot] < leastSeen {
			break
		}
		root, at := math.Sqrt(left[pivot]), l.RawRowView(pivot)[:c]
		for k := range v {
			row := l.RawRowView(k)
			row[c] = (p.At(k, pivot) - dot(at, row)) / root
			left[k] -= row[c] * row[c]
		}
		left[pivot] = 0
	}
	return l
}

// clean marks the samples in which a single reading contradicts the others under the
// pairing and the factors of a state, and returns how many there are. Hits of bright
// pixels hide among the masks' own light until the pairing is known.
func (s *sampler) clean(st *state) (found int) {
	rule := s.rule(st)
	for _, d := range s.data {
		found += rule.strike(d)
	}
	if found > 0 {
		s.resum()
	}
	return found
}

// resum adds all rows up again, in order.
func (s *sampler) resum() {
	s.reset()
	for i, d := range s.data {
		s.add(i, d)
	}
}

func (s *sampler) reset() {
	frames := len(s.album.Frames)
	s.gram, s.level, s.parts = hadamard.NewGram(frames), make([]float64, frames), nil
	for range parts {
		s.parts = append(s.parts, hadamard.NewGram(frames))
	}
}

func (s *sampler) add(i int, d *rowData) {
	g, level := d.gram(len(s.album.Frames))
	s.gram.Merge(g)
	s.parts[i%parts].Merge(g)
	for m, x := range level {
		s.level[m] += x
	}
}
