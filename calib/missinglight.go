package calib

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// MissingLight estimates light that was not recorded from light recorded around it.
// The light of mirrors is taken to be C + A g, C unknown, g a random field of variance
// 1 whose covariance is known; a datum is a weighted sum of mirrors plus noise, what is
// missing another such sum X. The estimate sum_i c_i D_i has the least variance of
// those that are right for every C (the best linear unbiased predictor: Matheron 1963,
// "ordinary kriging").
type MissingLight struct {
	// Data is, by pair of data, the covariance of g's sums in them; Target that of
	// each with X, and TargetVariance that of X with itself.
	Data           *mat.SymDense
	Target         []float64
	TargetVariance float64
	// Weight is, by datum, the sum of its mirrors' weights, and TargetWeight that of X.
	Weight       []float64
	TargetWeight float64
}

// Weights gives c for data whose noise has the variance A^2 noise each, independent of
// one another, and structure, the variance in units of A^2 by which X differs from
// sum_i c_i D_i if there is no noise. ok is false where the data do not fix C.
func (m *MissingLight) Weights(noise float64) (c []float64, structure float64, ok bool) {
	n := len(m.Weight)
	if n == 0 {
		return nil, 0, false
	}
	sum := mat.NewSymDense(n, nil)
	sum.CopySym(m.Data)
	// Neighbouring data hold nearly the same: a little noise keeps them apart.
	const least = 1e-9
	largest := 0.0
	for i := range n {
		largest = max(largest, m.Data.At(i, i))
	}
	for i := range n {
		sum.SetSym(i, i, m.Data.At(i, i)+noise+least*largest)
	}
	var factor mat.Cholesky
	if !factor.Factorize(sum) {
		return nil, 0, false
	}
	var k, w mat.VecDense
	target, weight := mat.NewVecDense(n, m.Target), mat.NewVecDense(n, m.Weight)
	// An ill-conditioned matrix is as good as its noise.
	_ = factor.SolveVecTo(&k, target)
	_ = factor.SolveVecTo(&w, weight)
	total := mat.Dot(weight, &w)
	if !(total > 0) {
		return nil, 0, false
	}
	k.AddScaledVec(&k, (m.TargetWeight-mat.Dot(weight, &k))/total, &w)
	structure = m.TargetVariance - 2*mat.Dot(&k, target) + mat.Inner(&k, m.Data, &k)
	return k.RawVector().Data, math.Max(structure, 0), true
}
