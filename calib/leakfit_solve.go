package calib

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Solve gives e(L); an error wrapping ErrNoLight where the rows do not fix it.
//
// A first solution without any structure tells how large e is, and so how large the
// structure may be. Where the fit then is worse than the noise (Chi2 above 1), what
// the variances lack counts as noise as well.
func (f *LeakFit) Solve() (*ColourTerm, error) {
	if f.pixels <= f.certain() || !(f.light > 0) {
		return nil, fmt.Errorf("leak fit: %w: %d pixels", ErrNoLight, f.pixels)
	}
	rough, err := f.solve(0, 1)
	if err != nil {
		return nil, err
	}
	size := math.Abs(rough.Coef[0])
	term, err := f.solve(size, 1)
	if err != nil || term.Chi2 <= 1 {
		return term, err
	}
	return f.solve(size, term.Chi2)
}

// solve takes noise to be widen times as large in variance as stated, and structures
// to be relative to e = size. Unknowns that are known to be 0 are left out.
func (f *LeakFit) solve(size, widen float64) (*ColourTerm, error) {
	priors := f.priors(size)
	var list []int
	for u, p := range priors {
		if p > 0 || u < f.certain() && f.normal.At(u, u) > 0 {
			list = append(list, u)
		}
	}
	// The matrix is scaled to a diagonal of 1: levels and light differ by orders.
	n := len(list)
	scale := make([]float64, n)
	for a, u := range list {
		scale[a] = 1 / math.Sqrt(f.knowledge(u, u, widen, priors))
	}
	normal, right := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for a, u := range list {
		right.SetVec(a, f.right[u]/widen*scale[a])
		for b := a; b < n; b++ {
			normal.SetSym(a, b, f.knowledge(u, list[b], widen, priors)*scale[a]*scale[b])
		}
	}
	var factor mat.Cholesky
	if !factor.Factorize(normal) || factor.Cond() > 1e13 {
		return nil, fmt.Errorf("leak fit: %w: %d pixels do not fix it", ErrNoLight, f.pixels)
	}
	var solution mat.VecDense
	var inverse mat.SymDense
	if err := factor.SolveVecTo(&solution, right); err != nil {
		return nil, fmt.Errorf("leak fit: %w", err)
	}
	if err := factor.InverseTo(&inverse); err != nil {
		return nil, fmt.Errorf("leak fit: %w", err)
	}
	for a := range list {
		solution.SetVec(a, solution.AtVec(a)*scale[a])
	}
	term := f.term(&solution, func(k, l int) float64 { return inverse.At(k, l) * scale[k] * scale[l] })
	term.Chi2 = f.chi2(&solution, list)
	return term, nil
}

// knowledge is an element of the inverse covariance: from the data and from before.
func (f *LeakFit) knowledge(u, v int, widen float64, priors []float64) float64 {
	k := f.normal.At(u, v) / widen
	if u == v && priors[u] > 0 {
		k += 1 / priors[u]
	}
	return k
}

// chi2 is that of the data, per pixel.
func (f *LeakFit) chi2(solution *mat.VecDense, list []int) float64 {
	sum := f.square
	for a, u := range list {
		sum -= 2 * solution.AtVec(a) * f.right[u]
		for b, v := range list {
			sum += solution.AtVec(a) * solution.AtVec(b) * f.normal.At(u, v)
		}
	}
	return sum / float64(f.pixels-f.certain())
}

// term takes e out of its scales; its unknowns come first.
func (f *LeakFit) term(solution *mat.VecDense, covariance func(k, l int) float64) *ColourTerm {
	n := f.colours()
	out := &ColourTerm{CenterNM: f.frame.Geometry.L_c, Pixels: f.pixels, Clipped: f.clips, Covariance: mat.NewSymDense(n, nil)}
	for k := range n {
		unit := math.Pow(colourScaleNM, -float64(k))
		out.Coef = append(out.Coef, solution.AtVec(k)*unit)
		for l := k; l < n; l++ {
			out.Covariance.SetSym(k, l, covariance(k, l)*unit*math.Pow(colourScaleNM, -float64(l)))
		}
	}
	return out
}
