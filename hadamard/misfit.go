package hadamard

import (
	"errors"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Misfit is what the error scale q is made of. For each pixel,
//
//	misfit[p] = y'Py = r'Xr,   expected[p] = sum_k P_kk s2_k,
//
// r the dark decodes and expected the mean of misfit under noise of the variances s2
// alone. q is the ratio of their sums over some pixels: near 1 where the variances
// tell the truth. decoded is A y as [code column][pixel], s2 the readings' variances,
// unclipped, as [code row][pixel]; misfit and expected hold pixels values.
//
// ExactMisfit weighs the dark columns by their whole covariance; this form takes it to
// be that of equal noise, and pays with scatter where the noise of a pixel's readings
// is unequal: none with read noise, 0 to 4 % with the photons of one to three stars, 23 %
// with every eighth row ten times as noisy (TestMisfitScatter). The mean is 1 for both.
func (c *Checks) Misfit(misfit, expected, decoded, s2 []float32, pixels, stride int) {
	c.check("Misfit", len(decoded), c.code.v, pixels, stride)
	c.check("Misfit", len(s2), c.code.v, pixels, stride)
	for p := 0; p < pixels; p += lanes {
		n := min(lanes, pixels-p)
		var sum, square, noise [lanes]float64
		if len(c.lost) == 0 {
			c.momentsAt(&sum, &square, decoded[p:], n, stride)
		} else {
			c.squaresAt(&square, decoded[p:], n, stride)
		}
		for k := range c.code.v {
			own := c.projector.At(k, k)
			for q, s := range s2[p+k*stride : p+k*stride+n] {
				noise[q] += float64(own * float64(s))
			}
		}
		for q := range n {
			misfit[p+q] = float32(square[q])
			expected[p+q] = float32(noise[q])
		}
	}
}

// momentsAt uses X = own I + common J: r'Xr = own sum(r^2) + common sum(r)^2. The
// result is in square.
func (c *Checks) momentsAt(sum, square *[lanes]float64, decoded []float32, n, stride int) {
	for _, j := range c.columns {
		for q, r := range decoded[j*stride : j*stride+n] {
			x := float64(r)
			sum[q] += x
			square[q] += float64(x * x)
		}
	}
	for q := range n {
		square[q] = float64(c.own*square[q]) + float64(c.common*sum[q]*sum[q])
	}
}

// squaresAt sums r'Xr entry by entry.
func (c *Checks) squaresAt(square *[lanes]float64, decoded []float32, n, stride int) {
	if c.inverse == nil {
		return
	}
	for q := range n {
		for a, i := range c.columns {
			x, across := float64(decoded[i*stride+q]), 0.0
			for b := a + 1; b < len(c.columns); b++ {
				across += float64(c.inverse.At(a, b) * float64(decoded[c.columns[b]*stride+q]))
			}
			square[q] += x * (float64(c.inverse.At(a, a)*x) + 2*across)
		}
	}
}

// MisfitDeviation is the standard deviation of q of one pixel whose readings have the
// variances s2: sqrt(2 tr(PNPN))/tr(PN), sqrt(2/G) for equal ones.
func (c *Checks) MisfitDeviation(s2 []float64) float64 {
	sum, trace := 0.0, 0.0
	for i, a := range s2 {
		trace += c.projector.At(i, i) * a
		for j, b := range s2 {
			x := c.projector.At(i, j)
			sum += x * x * a * b
		}
	}
	return math.Sqrt(2*sum) / trace
}

// errNoNoise is ExactMisfit's where the dark columns have no variance to be held against.
var errNoNoise = errors.New("the dark columns' covariance is singular: some readings have no variance")

// ExactMisfit is q = z'(B N B')^-1 z/G of one pixel, B the Basis, z = By and N the
// diagonal of s2, all above zero: chi-square with G degrees of freedom over G. It costs
// G^2 v operations.
func (c *Checks) ExactMisfit(y, s2 []float64) (float64, error) {
	if c.basis == nil {
		return 0, ErrNoChecks
	}
	var weighted, inner mat.Dense
	weighted.Apply(func(_, k int, x float64) float64 { return x * s2[k] }, c.basis)
	inner.Mul(&weighted, c.basis.T())
	var factor mat.Cholesky
	if !factor.Factorize(symmetric(&inner)) {
		return 0, errNoNoise
	}
	z, solved := mat.NewVecDense(c.G(), nil), mat.NewVecDense(c.G(), nil)
	z.MulVec(c.basis, mat.NewVecDense(len(y), y))
	if err := factor.SolveVecTo(solved, z); err != nil && !isCondition(err) {
		return 0, err
	}
	return mat.Dot(z, solved) / float64(c.G()), nil
}
