package hadamard

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// FrameTest asks of one row whether its frame is what it should be, whatever else it
// may be.
type FrameTest struct {
	Row int
	// Delta is by how much the chi-square falls once the row is erased and restored from
	// the others: u'Gu/P_kk with u the row's column of P.
	Delta float64
	// Expected is what noise alone gives, u'Nu/P_kk, near the number of pixels.
	Expected float64
	// LogP is the natural logarithm of the chance that noise alone gives as much. It
	// is 0 for a row without checks.
	LogP float64
}

// FrameTests tests every row. Under noise alone Delta/Expected times the number of
// pixels is distributed as chi-square with as many degrees of freedom as there are
// pixels: one number, u'y, is left of each. The rows' tests are correlated a little:
// see FalseAlarm for the largest of them.
//
// Noise that differs from row to row is in Expected; the law takes its pattern to be
// the same in all pixels. Light that varies in throughput raises Delta of all rows:
// test once it is corrected, or judge a row against the others.
func (c *Checks) FrameTests(g *Gram) []FrameTest {
	v := c.code.v
	tests := make([]FrameTest, v)
	if c.basis == nil || g.Pixels == 0 {
		for k := range tests {
			tests[k].Row = k
		}
		return tests
	}
	p := mat.DenseCopyOf(c.projector)
	delta := diagonalOf(p, g.sum)
	expected := diagonalOf(p, g.NoiseCovariance())
	for k := range tests {
		t := FrameTest{Row: k}
		if own := p.At(k, k); own > negligible && expected[k] > 0 {
			t.Delta, t.Expected = delta[k]/own, expected[k]/own
			n := float64(g.Pixels)
			t.LogP = logChiSquareTail(t.Delta/t.Expected*n, n)
		}
		tests[k] = t
	}
	return tests
}

// diagonalOf is the diagonal of p s p'.
func diagonalOf(p *mat.Dense, s *mat.SymDense) []float64 {
	var half mat.Dense
	half.Mul(p, mat.DenseCopyOf(s))
	n, _ := p.Dims()
	out := make([]float64, n)
	for k := range out {
		x, y := half.RawRowView(k), p.RawRowView(k)
		for i, a := range x {
			out[k] += float64(a * y[i])
		}
	}
	return out
}

// FalseAlarm is the LogP below which the least of v tests must lie for a chance of at
// most alpha that noise alone does it in any of them: log(alpha/v) (Bonferroni). The
// true chance is a little below alpha, since the tests are correlated.
func FalseAlarm(alpha float64, v int) float64 { return math.Log(alpha / float64(v)) }

// logChiSquareTail is the logarithm of the chance that a chi-square variable exceeds x.
func logChiSquareTail(x, dof float64) float64 { return logGammaTail(dof/2, x/2) }

// logGammaTail is log(Q(a,x)), Q the regularised upper incomplete gamma function; it
// does not underflow. For x below a+1 it sums the series of P = 1-Q, above it takes
// the continued fraction of Q by Lentz's method (Press et al. 1992, Numerical
// Recipes, section 6.2).
func logGammaTail(a, x float64) float64 {
	if !(x > 0) {
		return 0
	}
	logGamma, _ := math.Lgamma(a)
	front := a*math.Log(x) - x - logGamma
	if x < a+1 {
		return math.Log1p(-math.Exp(front) * gammaSeries(a, x))
	}
	return front + math.Log(gammaFraction(a, x))
}

// gammaIterations bounds both expansions: they need some ten times sqrt(a) terms.
const gammaIterations = 200_000

// gammaSeries is the sum of x^n/(a (a+1) ... (a+n)).
func gammaSeries(a, x float64) float64 {
	term := 1 / a
	sum := term
	for n := 1.0; n < gammaIterations && term > 1e-16*sum; n++ {
		term *= x / (a + n)
		sum += term
	}
	return sum
}

// gammaFraction is 1/(x+1-a- 1(1-a)/(x+3-a- 2(2-a)/(x+5-a- ...))).
func gammaFraction(a, x float64) float64 {
	const tiny = 1e-300
	b := x + 1 - a
	c, d := 1/tiny, 1/b
	h := d
	for i := 1.0; i < gammaIterations; i++ {
		an := -i * (i - a)
		b += 2
		d = an*d + b
		if math.Abs(d) < tiny {
			d = tiny
		}
		c = b + an/c
		if math.Abs(c) < tiny {
			c = tiny
		}
		d = 1 / d
		h *= d * c
		if math.Abs(d*c-1) < 1e-15 {
			break
		}
	}
	return h
}
