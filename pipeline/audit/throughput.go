package audit

import (
	"gonum.org/v1/gonum/mat"
)

// The prior of the throughput: 5 % from frame to frame, and 30 % from the first to the
// last.
const (
	priorScatter = 0.05
	priorTrend   = 0.30
)

// fit finds the factors 1+e that suit the state's pairing: with H = P*(G - N), the
// gradient H1 measures -He with the covariance H + B, B = P*N + P*P*sqrt(NN') (the
// readings' noise enters H as well as what H is held against), so that
//
//	e = -S H (H S H + H + B)^-1 H 1
//
// under the prior covariance S. The mean of e is held at 0, or the smallest chi-square
// would be that of no light at all. The excess is then chi-square at the factors, less
// the noise, and the price e'S^-1 e of the prior.
func (s *state) fit() {
	place, used := s.places()
	h, noise := mat.NewDense(s.v, s.v, nil), mat.NewSymDense(s.v, nil)
	gradient := mat.NewVecDense(s.v, nil)
	for k := range s.v {
		p, g, row := s.projector.RawRowView(k), s.sum.RawRowView(k), h.RawRowView(k)
		for i := range row {
			row[i] = p[i] * g[i]
			if i >= k {
				noise.SetSym(k, i, row[i]+p[i]*p[i]*geometric(s.noise[k], s.noise[i]))
			}
		}
		row[k] -= p[k] * s.noise[k]
		gradient.SetVec(k, sumOf(row))
	}
	// H S H = scatter^2 (HQ)(HQ)' + trend^2 (Ht)(Ht)', Q taking the mean off.
	spread := mat.DenseCopyOf(h)
	for k := range s.v {
		s.center(spread.RawRowView(k), used)
	}
	var trend mat.VecDense
	trend.MulVec(h, mat.NewVecDense(s.v, place))
	c := mat.NewSymDense(s.v, nil)
	c.SymOuterK(priorScatter*priorScatter, spread)
	c.SymRankOne(c, priorTrend*priorTrend, &trend)
	c.AddSym(c, noise)
	// Erased rows have nothing of their own; rounding is of the order of the largest.
	ridge := 1e-3*float64(s.pixels) + 1e-11*mat.Trace(c)
	for k := range s.v {
		c.SetSym(k, k, c.At(k, k)+ridge)
	}
	var chol mat.Cholesky
	var x, w mat.VecDense
	if !chol.Factorize(c) || chol.SolveVecTo(&x, gradient) != nil {
		return // the factors stay at 1
	}
	w.MulVec(h.T(), &x)
	along := dot(place, w.RawVector().Data)
	e := append([]float64(nil), w.RawVector().Data...)
	s.center(e, used)
	for k := range e {
		if s.erased[k] {
			e[k] = 0
			continue
		}
		e[k] = -priorScatter*priorScatter*e[k] - priorTrend*priorTrend*along*place[k]
		s.factor[k] = max(leastFactor, 1+e[k])
	}
	// Frames that are not believed are expected on the trend.
	for k, line := range s.trend() {
		if s.erased[k] && line > 0 {
			s.factor[k] = line
		}
	}
	s.scale()
	s.excess += price(e, place)
}

// price is e'S^-1 e for an e of mean 0.
func price(e, place []float64) float64 {
	const a, b = priorScatter * priorScatter, priorTrend * priorTrend
	along := dot(e, place)
	return (dot(e, e) - along*along*b/(a+b*dot(place, place))) / a
}

// center takes the mean over the rows in use off those rows, and 0 for the others.
func (s *state) center(x []float64, used float64) {
	mean := 0.0
	for k, off := range s.erased {
		if !off {
			mean += x[k] / used
		}
	}
	for k, off := range s.erased {
		x[k] -= mean
		if off {
			x[k] = 0
		}
	}
}

// leastFactor keeps a frame's factor above nothing.
const leastFactor = 0.1

// places gives each row in use its frame's place in time, of mean 0, and their number.
func (s *state) places() (place []float64, used float64) {
	place = make([]float64, s.v)
	for k, m := range s.from {
		if !s.erased[k] {
			place[k] = s.Place[m]
			used++
		}
	}
	s.center(place, used)
	return place, used
}
