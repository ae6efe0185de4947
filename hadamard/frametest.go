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
	// Expected is what noise alone gives, u'Nu/P_kk, near the number of pixels, and what
	// uncertain factors add to it.
	Expected float64
	// LogP is the natural logarithm of the chance that these alone give as much. It
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
// scale g by what Throughput found and use FrameTestsUnder.
func (c *Checks) FrameTests(g *Gram) []FrameTest { return c.FrameTestsUnder(g, nil) }

// FrameTestsUnder is FrameTests where the rows' factors are uncertain besides, with the
// relative covariance S (v x v; nil for none): for g scaled by a ThroughputFit its
// Posterior. Delta then holds sum_p (u'(e*y))^2/s^2/P_kk, of mean u'(S*G)u/P_kk; the law
// has its mean and variance (for S's diagonal), the factors' part of the variance in one
// degree of freedom, as it is where all pixels show the same. After a fit it errs on the
// side of silence: what the fit has explained of Delta is counted twice.
func (c *Checks) FrameTestsUnder(g *Gram, s *mat.SymDense) []FrameTest {
	v := c.code.v
	tests := make([]FrameTest, v)
	for k := range tests {
		tests[k].Row = k
	}
	if c.basis == nil || g.Pixels == 0 {
		return tests
	}
	p := mat.DenseCopyOf(c.projector)
	delta := diagonalOf(p, g.sum)
	noise := diagonalOf(p, g.NoiseCovariance())
	mean, square := make([]float64, v), make([]float64, v)
	if s != nil {
		mean, square = uncertainty(p, g, s)
	}
	n := float64(g.Pixels)
	for k := range tests {
		own := p.At(k, k)
		if own <= negligible || noise[k] <= 0 {
			continue
		}
		t := &tests[k]
		t.Delta, t.Expected = delta[k]/own, (noise[k]+mean[k])/own
		// All the variance that the factors make is given to one degree of freedom.
		single := min(mean[k], math.Sqrt(square[k])) / own
		variance := (2*noise[k]*noise[k] + 4*noise[k]*mean[k]) / n / (own * own)
		t.LogP = logMixtureTail(t.Delta, single, t.Expected-single, variance)
	}
	return tests
}

// logMixtureTail is the logarithm of the chance that single z^2 + y exceeds x, z normal of
// variance 1 and y gamma-distributed with a mean and variance. Without the first it is
// exact; with it, above the mean, by the saddlepoint (Lugannani and Rice 1980, Adv. Appl.
// Prob. 12, 475), and below by a gamma distribution for the sum.
func logMixtureTail(x, single, mean, variance float64) float64 {
	all, spread := mean+single, variance+2*single*single
	if single < 1e-9*mean || x < all+0.5*math.Sqrt(spread) {
		return logGammaTail(all*all/spread, x*all/spread)
	}
	scale, shape := variance/mean, mean*mean/variance
	low, high := 0.0, min(1/(2*single), 1/scale)
	slope := func(t float64) float64 { return single/(1-2*single*t) + shape*scale/(1-scale*t) }
	for range 200 {
		if t := (low + high) / 2; slope(t) < x {
			low = t
		} else {
			high = t
		}
	}
	t := low
	generating := -math.Log1p(-2*single*t)/2 - shape*math.Log1p(-scale*t)
	w := math.Sqrt(2 * (t*x - generating))
	curve := 2*math.Pow(single/(1-2*single*t), 2) + shape*math.Pow(scale/(1-scale*t), 2)
	u := t * math.Sqrt(curve)
	return -w*w/2 - math.Log(2*math.Pi)/2 + math.Log(mills(w)+1/u-1/w)
}

// mills is (1-Phi(w))/phi(w) for w > 0.
func mills(w float64) float64 {
	if w > 30 {
		return 1/w - 1/(w*w*w)
	}
	return math.Erfc(w/math.Sqrt2) / 2 * math.Sqrt(2*math.Pi) * math.Exp(w*w/2)
}

// uncertainty is the mean of sum_p (u'(e*y))^2/s^2 for every row's u under factors e of
// the covariance s, and half its variance for s's diagonal.
func uncertainty(p *mat.Dense, g *Gram, s *mat.SymDense) (mean, square []float64) {
	v := g.V()
	light := g.light()
	both, squares := mat.NewSymDense(v, nil), mat.NewSymDense(v, nil)
	for i := range v {
		for j := i; j < v; j++ {
			l := light.At(i, j)
			both.SetSym(i, j, s.At(i, j)*l)
			squares.SetSym(i, j, s.At(i, i)*s.At(j, j)*l*l)
		}
	}
	var p2 mat.Dense
	p2.MulElem(p, p)
	mean, square = diagonalOf(p, both), diagonalOf(&p2, squares)
	for k := range mean {
		mean[k] = max(0, mean[k]) // below by noise where there is no light
	}
	return mean, square
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
