package hadamard

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// Chi2 is the chi-square of the checks over all pixels of g, sum_p y'Py/s_p^2 =
// sum(P * G), with what noise alone gives and its standard deviation,
//
//	expected = sum(P * N),   sd^2 = 2 tr(P N P N)/pixels,
//
// N the noise covariance of g: pixels times G when all rows have equal noise. The
// deviation takes the noise to be distributed over the rows as it is on average.
// Half the difference between two pairings is their log-odds.
func (c *Checks) Chi2(g *Gram) (chi2, expected, sd float64) {
	chi2 = product(c.projector, g.sum)
	if g.Pixels == 0 {
		return chi2, 0, 0
	}
	if g.covariance == nil {
		for i, n := range g.noise {
			expected += c.projector.At(i, i) * n
			for j, m := range g.noise {
				p := c.projector.At(i, j)
				sd += 2 * p * p * n * m
			}
		}
		return chi2, expected, math.Sqrt(sd / float64(g.Pixels))
	}
	var pn mat.Dense
	pn.Mul(mat.DenseCopyOf(c.projector), mat.DenseCopyOf(g.covariance))
	expected = mat.Trace(&pn)
	for i := range g.V() {
		for j := range g.V() {
			sd += 2 * pn.At(i, j) * pn.At(j, i)
		}
	}
	return chi2, expected, math.Sqrt(sd / float64(g.Pixels))
}

// product is sum(a * b) of two symmetric matrices.
func product(a, b *mat.SymDense) float64 {
	ra, rb := a.RawSymmetric(), b.RawSymmetric()
	sum := 0.0
	for i := range ra.N {
		x, y := ra.Data[i*ra.Stride:i*ra.Stride+ra.N], rb.Data[i*rb.Stride:i*rb.Stride+rb.N]
		above := 0.0
		for j := i + 1; j < ra.N; j++ {
			above += float64(x[j] * y[j])
		}
		sum += float64(x[i]*y[i]) + 2*above
	}
	return sum
}
