package hadamard

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// ThroughputFit is the relative transmission c of the rows as the dark columns see
// it, arithmetic mean 1 over the rows used (all but those that the checks' WithoutRows
// took out; a lost row's values are what the prior makes of the others).
type ThroughputFit struct {
	// C is the throughput, E = 1/C - 1: readings are multiplied by 1 + E, exactly.
	C, E []float64
	// CErr is the standard deviation of C's error.
	CErr []float64
	// Posterior is the covariance of E's error (v x v): an element's variance grows by
	// sum_kl A_jk y_k Posterior_kl y_l A_jl.
	Posterior *mat.SymDense
	// Prior and Error are the rms standard deviations of the used rows' C before and
	// after the fit.
	Prior, Error float64
	// Directions is how many independent patterns of throughput the scene measures,
	// at most one less than the rows used (the scale is no throughput).
	Directions float64
	// HeldOut judges the fit by checks that it has not seen.
	HeldOut HeldOut
	// Kept: the held-out chi-square falls, and at least one pattern is measured (below
	// that the fit is the noise of H). Where it is false the readings are better
	// left as they are; C and E still hold the fit.
	Kept bool

	used int
}

// HeldOut is the chi-square of each part of the dark set under the correction fitted
// on the others, all parts summed, before and after the correction, with what noise
// alone gives (the correction multiplies noise too) and its standard deviation. A
// residual that took part in a fit proves nothing; this one does.
type HeldOut struct {
	Before, ExpectedBefore float64
	After, ExpectedAfter   float64
	SD                     float64 // of After under noise alone
}

// leastFall is by how much a held-out chi-square must fall. A correction of one pattern
// that is not there makes it fall in a third of all cases, by about 1; by 9 in one of
// 770.
const leastFall = 9

// Falls tells whether the correction brings the held-out chi-square nearer to what
// noise gives, by more than chance would.
func (h HeldOut) Falls() bool {
	return h.After-h.ExpectedAfter < h.Before-h.ExpectedBefore-leastFall
}

func (h *HeldOut) add(c *Checks, before, after *Gram) {
	x, expected, _ := c.Chi2(before)
	h.Before, h.ExpectedBefore = h.Before+x, h.ExpectedBefore+expected
	x, expected, sd := c.Chi2(after)
	h.After, h.ExpectedAfter = h.After+x, h.ExpectedAfter+expected
	h.SD = math.Hypot(h.SD, sd)
}

// Measured tells whether the scene can measure throughput: three quarters of the
// patterns or more, so that the error of independent frames is below half of what was
// assumed. (A trend in time is one pattern that most scenes measure: the ratio of
// Error to Prior alone, with a large trend assumed, would call one star enough.)
func (f *ThroughputFit) Measured() bool {
	return f.used > 1 && f.Directions >= 0.75*float64(f.used-1)
}

// DefaultThroughputPrior is the covariance of E that a night is given before its
// frames are seen: independent relative errors of rms independent, and a linear trend
// whose span from end to end has the standard deviation trendSpan. times are those of
// the rows, the night running from -0.5 to 0.5.
func DefaultThroughputPrior(times []float64, independent, trendSpan float64) *mat.SymDense {
	s := mat.NewSymDense(len(times), nil)
	for i, a := range times {
		for j := i; j < len(times); j++ {
			s.SetSym(i, j, trendSpan*trendSpan*a*times[j])
		}
		s.SetSym(i, i, s.At(i, i)+independent*independent)
	}
	return s
}

// Throughput measures the rows' throughput from the dark columns.
//
// With y the readings, c their throughput and E = 1/c - 1, every noiseless pixel has
// P((1+E)*y) = 0. Multiplied by y and summed over the pixels that is -H1 = HE with
// H = P * sum_p y y'/s^2 (* elementwise), which G less its noise estimates. The noise
// of H1 has the covariance V = (P N P) * G + pixels P * P * nn', N = diag(n) the noise of
// the average pixel (where all rows have equal noise, n = 1 and V = H + B with B =
// pixels (diag P + P * P)). So the linear estimate of least error under a prior
// covariance S of E, and its error, are
//
//	E = S H (H S H + V)^-1 (-H1),   Posterior = S - S H (H S H + V)^-1 H S,
//
// never worse than no correction, on average, whatever the scene. (The directions in which
// H is no more than the noise of its own measurement are taken out of it first.) The smallest
// eigenvector of H, which needs no prior, is off by hundreds of percent where the
// scene lights too few steps independently, as one star does.
//
// The fit is made on all but a part of the dark set, judged on that part, for each of two
// parts, or of four where the checks are few; and on all. Errors: a prior of another size, or one that is no covariance; no pixels.
func (c *Checks) Throughput(g *Gram, prior *mat.SymDense) (*ThroughputFit, error) {
	if err := c.checkFit(g, prior); err != nil {
		return nil, err
	}
	held := HeldOut{}
	for _, part := range c.splits() {
		fit, err := part.fit.fitThroughput(g, prior)
		if err != nil {
			return nil, err
		}
		held.add(part.judge, g, g.Scaled(fit.factors()))
	}
	fit, err := c.fitThroughput(g, prior)
	if err != nil {
		return nil, err
	}
	fit.HeldOut = held
	fit.Kept = held.Falls() && fit.Directions >= 1
	return fit, nil
}

func (c *Checks) checkFit(g *Gram, prior *mat.SymDense) error {
	v := c.code.v
	if n := prior.SymmetricDim(); n != v || g.V() != v {
		return fmt.Errorf("throughput of %d code rows: the Gram matrix has %d and the prior %d", v, g.V(), n)
	}
	if g.Pixels == 0 {
		return fmt.Errorf("throughput: none of the %d sampled pixels can be used; sample more of the detector", g.Skipped)
	}
	return nil
}

func (f *ThroughputFit) factors() []float64 {
	factors := make([]float64, len(f.E))
	for k, e := range f.E {
		factors[k] = 1 + e
	}
	return factors
}

// fitThroughput is the fit on all of c's checks.
func (c *Checks) fitThroughput(g *Gram, prior *mat.SymDense) (*ThroughputFit, error) {
	found, err := estimate(c.equations(g.lightSums()), prior)
	if err != nil {
		return nil, fmt.Errorf("throughput: %w", err)
	}
	return newThroughputFit(found.e, found.posterior, prior, found.directions[0], c.usedRows()), nil
}

// newThroughputFit makes the fit of an estimate, e taken over and normalised.
func newThroughputFit(e []float64, posterior, prior *mat.SymDense, directions float64, used []int) *ThroughputFit {
	fit := &ThroughputFit{E: e, Directions: directions, used: len(used)}
	normalised, _ := normaliseThroughput(make([]float64, len(e)), prior, used)
	fit.Prior = rmsError(normalised, used)
	fit.Posterior, fit.C = normaliseThroughput(e, posterior, used)
	fit.CErr = make([]float64, len(e))
	sum := 0.0
	for k, x := range fit.C {
		fit.CErr[k] = x * x * math.Sqrt(fit.Posterior.At(k, k))
	}
	for _, k := range used {
		sum += fit.CErr[k] * fit.CErr[k]
	}
	fit.Error = math.Sqrt(sum / float64(max(1, len(used))))
	return fit
}

// usedRows are the rows that are not lost.
func (c *Checks) usedRows() []int {
	var used []int
	next := 0
	for k := range c.code.v {
		if next < len(c.lost) && c.lost[next] == k {
			next++
			continue
		}
		used = append(used, k)
	}
	return used
}

func rmsError(covariance *mat.SymDense, used []int) float64 {
	sum := 0.0
	for _, k := range used {
		sum += covariance.At(k, k)
	}
	return math.Sqrt(sum / float64(max(1, len(used))))
}

// minFactor bounds e from below: a frame is divided by ten at most, and 1+e stays positive
// whatever noise did to the fit.
const minFactor = -0.9

// normaliseThroughput scales c = 1/(1+e) to mean 1 over the used rows, sets e to what
// belongs to it, and returns the covariance of e's error then. The scale is a
// convention: what the fit does not know of it is no error. With c = x/mean(x),
// x = 1/(1+e) and u = dE/(1+E) of the row itself, de_k = (1+e_k) (u_k - mean(c u)).
func normaliseThroughput(e []float64, covariance *mat.SymDense, used []int) (*mat.SymDense, []float64) {
	v := len(e)
	c, mean := make([]float64, v), 0.0
	for k := range c {
		c[k] = 1 / (1 + max(e[k], minFactor))
	}
	for _, k := range used {
		mean += c[k] / float64(len(used))
	}
	jacobian := mat.NewDense(v, v, nil)
	for k := range c {
		raw := c[k]
		c[k] /= mean
		e[k] = 1/c[k] - 1
		jacobian.Set(k, k, raw*(1+e[k]))
	}
	for k := range c {
		for _, m := range used {
			jacobian.Set(k, m, jacobian.At(k, m)-(1+e[k])*c[m]*c[m]*mean/float64(len(used)))
		}
	}
	return congruent(jacobian, covariance), c
}
