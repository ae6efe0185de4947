package hadamard

import (
	"errors"

	"gonum.org/v1/gonum/mat"
)

var errNoCovariance = errors.New("the prior is no covariance matrix")

// estimated is what equations say of their unknowns.
type estimated struct {
	e         []float64
	posterior *mat.SymDense
	// directions is, by kind of light, how many independent patterns of e are measured:
	// its part of the trace of (H S H + V)^-1 H S H, what the equations add to the
	// prior's knowledge.
	directions []float64
}

// estimate solves the equations under the prior covariance s of e: the estimate
// -S H (H S H + V)^-1 d and its error's covariance, H as measured says. Unknowns on
// which no equation bears (their V is zero) follow the others by the prior alone.
func estimate(eq *normalEquations, s *mat.SymDense) (*estimated, error) {
	n := len(eq.d)
	out := &estimated{e: make([]float64, n), posterior: mat.NewSymDense(n, nil), directions: make([]float64, n/eq.size)}
	out.posterior.CopySym(s)
	active := eq.active()
	if len(active) == 0 {
		return out, nil
	}
	h, noise := selected(eq.measured(), active, active), selected(eq.v, active, active)
	var gain, total mat.Dense // S H of all unknowns, H S H
	gain.Mul(selected(s, all(n), active), h)
	total.Mul(h, selected(&gain, active, all(len(active))))
	total.Add(&total, noise)
	factor, err := factorised(symmetric(&total))
	if err != nil {
		return nil, err
	}
	var weights, change, share mat.Dense
	if err := factor.SolveTo(&weights, gain.T()); err != nil && !isCondition(err) {
		return nil, err
	}
	if err := factor.SolveTo(&share, noise); err != nil && !isCondition(err) {
		return nil, err
	}
	d := mat.NewVecDense(len(active), nil)
	for a, i := range active {
		d.SetVec(a, -eq.d[i])
		out.directions[i/eq.size] += 1 - share.At(a, a)
	}
	mat.NewVecDense(n, out.e).MulVec(weights.T(), d)
	change.Mul(&gain, &weights)
	for i := range n {
		for j := i; j < n; j++ {
			x := s.At(i, j) - (change.At(i, j)+change.At(j, i))/2
			if i == j {
				x = max(0, x) // below by rounding
			}
			out.posterior.SetSym(i, j, x)
		}
	}
	return out, nil
}

// Ridges, in units of the diagonal, that factorised tries. At a signal to noise ratio of
// hundreds H S H outweighs V by more than float64 holds, and rounding makes eigenvalues
// that are only V's negative. A larger V is the safe side: the estimate stays nearer to
// the prior.
var ridges = []float64{0, 1e-14, 1e-12, 1e-10}

// factorised is the Cholesky factor of a covariance, with the smallest ridge that makes
// one of it. The error is errNoCovariance.
func factorised(m *mat.SymDense) (*mat.Cholesky, error) {
	n := m.SymmetricDim()
	diagonal := make([]float64, n)
	for i := range diagonal {
		diagonal[i] = m.At(i, i)
	}
	factor := new(mat.Cholesky)
	for _, ridge := range ridges {
		for i, x := range diagonal {
			m.SetSym(i, i, x*(1+ridge))
		}
		if factor.Factorize(m) {
			return factor, nil
		}
	}
	return nil, errNoCovariance
}

// active are the unknowns on which the equations bear.
func (eq *normalEquations) active() []int {
	var list []int
	for i := range eq.d {
		if eq.v.At(i, i) > 0 {
			list = append(list, i)
		}
	}
	return list
}

// selected is the submatrix of some rows and columns.
func selected(m mat.Matrix, rows, columns []int) *mat.Dense {
	out := mat.NewDense(len(rows), len(columns), nil)
	for a, i := range rows {
		for b, j := range columns {
			out.Set(a, b, m.At(i, j))
		}
	}
	return out
}

func all(n int) []int {
	list := make([]int, n)
	for i := range list {
		list[i] = i
	}
	return list
}

// isCondition tells a warning of an ill-conditioned matrix from an error.
func isCondition(err error) bool {
	var condition mat.Condition
	return errors.As(err, &condition)
}
