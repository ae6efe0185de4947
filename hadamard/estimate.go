package hadamard

import (
	"errors"
	"math"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// normalEquations are d = -H e + noise of covariance V, the checks' summed equations
// for the unknowns e. H is measured: it holds noise whose eigenvalues reach to edge.
type normalEquations struct {
	h, v *mat.SymDense
	d    []float64
	edge float64
}

// normalEquations are those of the throughput: see Throughput.
func (c *Checks) normalEquations(g *Gram) normalEquations {
	v := c.code.v
	light := g.light()
	n := make([]float64, v)
	for k := range n {
		n[k] = g.noise[k] / float64(g.Pixels)
	}
	pnp := c.noiseOfChecks(n)
	eq := normalEquations{h: mat.NewSymDense(v, nil), v: mat.NewSymDense(v, nil), d: make([]float64, v)}
	pixels := float64(g.Pixels)
	for i := range v {
		for j := i; j < v; j++ {
			p := c.projector.At(i, j)
			eq.h.SetSym(i, j, p*light.At(i, j))
			eq.v.SetSym(i, j, pnp.At(i, j)*light.At(i, j)+pixels*p*p*n[i]*n[j])
		}
		noise := pixels * n[i] * pnp.At(i, i) // of H's row i, squares summed
		eq.v.SetSym(i, i, eq.v.At(i, i)+noise)
		eq.edge = max(eq.edge, 2*math.Sqrt(noise))
	}
	for i := range v {
		for j := range v {
			eq.d[i] += eq.h.At(i, j)
		}
	}
	return eq
}

// noiseOfChecks is P diag(n) P.
func (c *Checks) noiseOfChecks(n []float64) *mat.SymDense {
	out := mat.NewSymDense(len(n), nil)
	if c.basis == nil {
		return out
	}
	var weighted, inner mat.Dense
	weighted.Apply(func(_, k int, x float64) float64 { return x * n[k] }, c.basis)
	inner.Mul(&weighted, c.basis.T())
	return congruent(c.basis.T(), symmetric(&inner))
}

var errNoCovariance = errors.New("the prior is no covariance matrix")

// estimated is what the equations say of the unknowns.
type estimated struct {
	e         []float64
	posterior *mat.SymDense
	// directions is the trace of what the equations add to the prior's knowledge,
	// tr((H S H + V)^-1 H S H): how many independent patterns of e they measure.
	directions float64
}

// estimate solves the equations under the prior covariance s of e: the estimate
// -S H (H S H + V)^-1 d and its error's covariance. Unknowns on which no equation
// bears (their V is zero) follow the others by the prior alone.
//
// H holds the noise of its own measurement. Directions in which it is no more than
// that, eigenvalues below the edge of a noise matrix's (twice the root of the squares
// of a row: Wigner 1958, Ann. Math. 67, 325; negative ones among them), are taken as not
// measured: with a wide prior they would be answered with noise.
// V can have eigenvalues below zero where there are too few pixels: clipped too.
func estimate(eq normalEquations, s *mat.SymDense) (*estimated, error) {
	n := len(eq.d)
	posterior := mat.NewSymDense(n, nil)
	posterior.CopySym(s)
	var active []int
	for i := range n {
		if eq.v.At(i, i) > 0 {
			active = append(active, i)
		}
	}
	e := make([]float64, n)
	if len(active) == 0 {
		return &estimated{e: e, posterior: posterior}, nil
	}
	m := len(active)
	h, noise, d := mat.NewSymDense(m, nil), mat.NewSymDense(m, nil), mat.NewVecDense(m, nil)
	prior := mat.NewDense(n, m, nil) // S between all unknowns and the active ones
	for a, i := range active {
		d.SetVec(a, -eq.d[i])
		for b := a; b < m; b++ {
			h.SetSym(a, b, eq.h.At(i, active[b]))
			noise.SetSym(a, b, eq.v.At(i, active[b]))
		}
		for j := range n {
			prior.Set(j, a, s.At(j, i))
		}
	}
	h = clipped(h, eq.edge)
	factor, gain, ok := factorize(prior, active, h, noise)
	if !ok {
		noise = clipped(noise, 0)
		for a := range m {
			noise.SetSym(a, a, noise.At(a, a)*(1+1e-6))
		}
		if factor, gain, ok = factorize(prior, active, h, noise); !ok {
			return nil, errNoCovariance
		}
	}
	var weights, change mat.Dense
	if err := factor.SolveTo(&weights, gain.T()); err != nil && !isCondition(err) {
		return nil, err
	}
	mat.NewVecDense(n, e).MulVec(weights.T(), d)
	change.Mul(gain, &weights)
	for i := range n {
		for j := i; j < n; j++ {
			posterior.SetSym(i, j, posterior.At(i, j)-(change.At(i, j)+change.At(j, i))/2)
		}
		if posterior.At(i, i) < 0 { // by rounding
			posterior.SetSym(i, i, 0)
		}
	}
	var share mat.Dense
	if err := factor.SolveTo(&share, noise); err != nil && !isCondition(err) {
		return nil, err
	}
	return &estimated{e: e, posterior: posterior, directions: float64(m) - mat.Trace(&share)}, nil
}

// factorize forms and factorises H S H + V; gain is S H of all unknowns.
func factorize(prior *mat.Dense, active []int, h, noise *mat.SymDense) (*mat.Cholesky, *mat.Dense, bool) {
	var gain, total mat.Dense
	full := mat.DenseCopyOf(h) // products with a SymDense are ten times as slow
	gain.Mul(prior, full)
	rows := mat.NewDense(len(active), len(active), nil)
	for a, i := range active {
		rows.SetRow(a, gain.RawRowView(i))
	}
	total.Mul(full, rows)
	system := symmetric(&total)
	system.AddSym(system, noise)
	var factor mat.Cholesky
	ok := factor.Factorize(system)
	return &factor, &gain, ok
}

// clipped is a symmetric matrix with the eigenvalues up to an edge set to zero.
func clipped(s *mat.SymDense, edge float64) *mat.SymDense {
	n := s.SymmetricDim()
	var eigen mat.EigenSym
	if !eigen.Factorize(s, true) {
		return mat.NewSymDense(n, nil) // nothing is measured
	}
	values := eigen.Values(nil)
	first := sort.Search(n, func(i int) bool { return values[i] > edge })
	if first == n {
		return mat.NewSymDense(n, nil)
	}
	var vectors, scaled, full mat.Dense
	eigen.VectorsTo(&vectors)
	kept := vectors.Slice(0, n, first, n)
	scaled.Apply(func(_, j int, x float64) float64 { return x * values[first+j] }, kept)
	full.Mul(&scaled, kept.T())
	return symmetric(&full)
}

// isCondition tells a warning of an ill-conditioned matrix from an error.
func isCondition(err error) bool {
	var condition mat.Condition
	return errors.As(err, &condition)
}
