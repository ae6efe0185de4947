package calib

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
)

// Solve gives e(L); an error wrapping ErrNoLight where the rows do not fix it.
//
// A first solution without any structure tells how large e is, and so how large the
// structure may be. Where the fit with the widest structures is worse than the noise (Chi2
// above 1), what the variances lack counts as noise as well.
func (f *LeakFit) Solve() (*ColourTerm, error) {
	if f.pixels <= f.certain() || !(f.light > 0) {
		return nil, fmt.Errorf("leak fit: %w: %d pixels", ErrNoLight, f.pixels)
	}
	rough, _, err := f.solve(sizes{}, 1)
	if err != nil {
		return nil, err
	}
	all := f.sizes(math.Abs(rough.Coef[0]))
	widest, _, err := f.solve(all[len(all)-1], 1)
	if err != nil {
		return nil, err
	}
	terms, weights := make([]*ColourTerm, len(all)), make([]float64, len(all))
	for i, s := range all {
		if terms[i], weights[i], err = f.solve(s, max(1, widest.Chi2)); err != nil {
			return nil, err
		}
	}
	top := slices.Max(weights)
	for i, logarithm := range weights {
		weights[i] = math.Exp(logarithm - top)
	}
	e := mixedTerm(terms, weights, widest.Chi2)
	e.Covariance.SymRankOne(e.Covariance, f.rule.Model*f.rule.Model, mat.NewVecDense(len(e.Coef), e.Coef))
	return e, nil
}

// sizes are all combinations where e is e0, the widest last.
func (f *LeakFit) sizes(e0 float64) []sizes {
	var all []sizes
	for _, fall := range f.rule.Fall {
		for _, s := range f.rule.Structure {
			for _, b := range f.rule.Beyond {
				all = append(all, sizes{structure: s * e0, beyond: b * e0, fall: fall})
			}
		}
	}
	return all
}

// mixedTerm is the weighted mean of terms, its covariance that of their mixture.
func mixedTerm(terms []*ColourTerm, weights []float64, chi2 float64) *ColourTerm {
	n := len(terms[0].Coef)
	out := *terms[0]
	out.Coef, out.Covariance, out.Chi2 = make([]float64, n), mat.NewSymDense(n, nil), chi2
	total := floats.Sum(weights)
	for i, t := range terms {
		floats.AddScaled(out.Coef, weights[i]/total, t.Coef)
	}
	for i, t := range terms {
		off := make([]float64, n)
		floats.SubTo(off, t.Coef, out.Coef)
		out.Covariance.AddSym(out.Covariance, scaledSym(weights[i]/total, t.Covariance))
		out.Covariance.SymRankOne(out.Covariance, weights[i]/total, mat.NewVecDense(n, off))
	}
	return &out
}

func scaledSym(factor float64, m *mat.SymDense) *mat.SymDense {
	var out mat.SymDense
	out.ScaleSym(factor, m)
	return &out
}

// solve takes noise to be widen times as large in variance as stated. Unknowns that are
// known to be 0 are left out. logarithm is that of how likely s makes the data, but for a
// constant.
func (f *LeakFit) solve(s sizes, widen float64) (term *ColourTerm, logarithm float64, err error) {
	priors := f.priors(s)
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
		return nil, 0, fmt.Errorf("leak fit: %w: %d pixels do not fix it", ErrNoLight, f.pixels)
	}
	var solution mat.VecDense
	var inverse mat.SymDense
	if err := factor.SolveVecTo(&solution, right); err != nil {
		return nil, 0, fmt.Errorf("leak fit: %w", err)
	}
	if err := factor.InverseTo(&inverse); err != nil {
		return nil, 0, fmt.Errorf("leak fit: %w", err)
	}
	// The data's density, with all unknowns integrated out.
	logarithm = -factor.LogDet() / 2
	for a, u := range list {
		logarithm += solution.AtVec(a)*right.AtVec(a)/2 + math.Log(scale[a])
		if priors[u] > 0 {
			logarithm -= math.Log(priors[u]) / 2
		}
		solution.SetVec(a, solution.AtVec(a)*scale[a])
	}
	term = f.term(&solution, func(k, l int) float64 { return inverse.At(k, l) * scale[k] * scale[l] })
	term.Chi2 = f.chi2(&solution, list)
	return term, logarithm, nil
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
