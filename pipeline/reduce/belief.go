package reduce

import (
	"errors"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
)

// belief is what is known of e = 1/c - 1 of the sample's frames: a mean and the
// covariance of its error. The scale of c is a convention that no method knows.
type belief struct {
	mean       []float64
	covariance *mat.SymDense
	// scatter is the rms by which a frame that nothing was measured of is taken to differ.
	scatter float64
}

var errSingularBelief = errors.New("internal error: a covariance of throughputs is not positive")

// isCondition tells a warning of an ill-conditioned matrix from an error.
func isCondition(err error) bool {
	var condition mat.Condition
	return errors.As(err, &condition)
}

// What a night is taken to do until it is measured: each frame differs by
// priorScatter, and the whole night's trend spans priorTrend from end to end, as the
// airmass of a long visit and thin clouds make it.
const (
	priorScatter = 0.05
	priorTrend   = 0.30
)

func newBelief(times []float64) *belief { return newBeliefOf(times, priorScatter, priorTrend) }

// newBeliefOf is that of frames that scatter by so much around a trend of such a span.
func newBeliefOf(times []float64, scatter, trend float64) *belief {
	return &belief{mean: make([]float64, len(times)), covariance: hadamard.DefaultThroughputPrior(times, scatter, trend), scatter: scatter}
}

func (b *belief) clone() *belief {
	c := &belief{mean: slices.Clone(b.mean), covariance: mat.NewSymDense(len(b.mean), nil), scatter: b.scatter}
	c.covariance.CopySym(b.covariance)
	return c
}

// times are the middles of the frames' exposures, from -0.5 in the first to 0.5 in
// the last, and in minutes since the first: by DATE-OBS where all have it, or else by the sequence's own times.
func (r *reduction) times(frames []*exposure.Frame) (times, minutes []float64) {
	at := r.plannedTimes()
	t := make([]float64, len(frames))
	starts := map[int]float64{}
	for _, f := range r.night.Frames {
		if !f.Start.IsZero() {
			starts[f.StepIndex] = float64(f.Start.Sub(r.night.Frames[0].Start)) / 1e9
		}
	}
	dated := true
	for _, f := range frames {
		_, known := starts[f.Step]
		dated = dated && known
	}
	for k, f := range frames {
		t[k] = at[f.Step]
		if dated && !r.night.Frames[0].Start.IsZero() {
			t[k] = starts[f.Step] + r.seq.Steps[f.Step].ExptimeSeconds/2
		}
	}
	minutes = make([]float64, len(t))
	for k, x := range t {
		minutes[k] = (x - slices.Min(t)) / 60
	}
	return normalTimes(t), minutes
}

// normalTimes brings times to -0.5..0.5.
func normalTimes(t []float64) []float64 {
	first, last := math.Inf(1), math.Inf(-1)
	for _, x := range t {
		first, last = min(first, x), max(last, x)
	}
	for k, x := range t {
		t[k] = 0
		if last > first {
			t[k] = (x-first)/(last-first) - 0.5
		}
	}
	return t
}

// plannedTimes are the middles of all steps in seconds, exposed and read one after
// the other.
func (r *reduction) plannedTimes() []float64 {
	at, all := 0.0, make([]float64, len(r.seq.Steps))
	for i, st := range r.seq.Steps {
		all[i] = at + st.ExptimeSeconds/2
		at += st.ExptimeSeconds + r.seq.Profile.OverheadS()
	}
	return all
}

// freeScale is the standard deviation of a measurement's unknown scale: so large that
// nothing of it is believed, so small that rounding does no harm. Another scale of c
// moves e by multiples of 1+e.
const freeScale = 10.0

// relative is an independent measurement of c by frame, on any scale; error is its
// standard error, +Inf where a frame was not measured.
type relative struct {
	c, err []float64
}

// newRelative is one of n frames that were not measured.
func newRelative(n int) *relative {
	m := &relative{c: make([]float64, n), err: make([]float64, n)}
	for k := range m.err {
		m.err[k] = math.Inf(1)
	}
	return m
}

// grow multiplies the errors.
func (m *relative) grow(by float64) {
	for k := range m.err {
		m.err[k] *= by
	}
}

// e gives 1/c - 1 of the frames that were measured, c scaled to mean 1, with errors.
func (m *relative) e() (frames []int, e, err []float64) {
	sum := 0.0
	for k, c := range m.c {
		if !math.IsInf(m.err[k], 1) {
			frames = append(frames, k)
			sum += c
		}
	}
	mean := sum / float64(len(frames))
	for _, k := range frames {
		c := m.c[k] / mean
		e, err = append(e, 1/c-1), append(err, m.err[k]/mean/(c*c))
	}
	return frames, e, err
}

// learn takes a measurement into account: the estimate of least error of two
// independent sources (Gauss and Markov), the measurement's scale left free.
func (b *belief) learn(m *relative) error {
	frames, e, err := m.e()
	n := len(b.mean)
	if len(frames) < 2 {
		return nil
	}
	gain := mat.NewDense(n, len(frames), nil) // of the belief: covariance of all with the measured
	system := mat.NewSymDense(len(frames), nil)
	off := mat.NewVecDense(len(frames), nil)
	for a, k := range frames {
		off.SetVec(a, e[a]-b.mean[k])
		for i := range n {
			gain.Set(i, a, b.covariance.At(i, k))
		}
		for c := a; c < len(frames); c++ {
			system.SetSym(a, c, b.covariance.At(k, frames[c])+freeScale*freeScale*(1+e[a])*(1+e[c]))
		}
		system.SetSym(a, a, system.At(a, a)+err[a]*err[a])
	}
	var factor mat.Cholesky
	if !factor.Factorize(system) {
		return errSingularBelief
	}
	var weights, change mat.Dense
	if err := factor.SolveTo(&weights, gain.T()); err != nil && !isCondition(err) {
		return err
	}
	var shift mat.VecDense
	shift.MulVec(weights.T(), off)
	change.Mul(gain, &weights)
	for i := range n {
		b.mean[i] += shift.AtVec(i)
		for j := i; j < n; j++ {
			b.covariance.SetSym(i, j, b.covariance.At(i, j)-(change.At(i, j)+change.At(j, i))/2)
		}
	}
	return nil
}

// compare is the chi-square of a measurement against the belief, with its number of
// degrees of freedom: the difference of the two has the sum of their covariances, but
// for the scale, which costs one degree.
func (b *belief) compare(m *relative) (chi2 float64, dof int, err error) {
	frames, e, sigma := m.e()
	if len(frames) < 2 {
		return 0, 0, nil
	}
	system := mat.NewSymDense(len(frames), nil)
	off := mat.NewVecDense(len(frames), nil)
	for a, k := range frames {
		off.SetVec(a, e[a]-b.mean[k])
		for c := a; c < len(frames); c++ {
			system.SetSym(a, c, b.covariance.At(k, frames[c])+freeScale*freeScale*(1+e[a])*(1+e[c]))
		}
		system.SetSym(a, a, system.At(a, a)+sigma[a]*sigma[a])
	}
	var factor mat.Cholesky
	if !factor.Factorize(system) {
		return 0, 0, errSingularBelief
	}
	var x mat.VecDense
	if err := factor.SolveVecTo(&x, off); err != nil && !isCondition(err) {
		return 0, 0, err
	}
	return mat.Dot(off, &x), len(frames) - 1, nil
}

// normalise scales c = 1/(1+e) to mean 1 over the frames, and the covariance with it:
// with x = 1/(1+e), c = x/mean(x) and u = de/(1+e), the new error is
// (1+e') (u_k - mean(c u)).
func (b *belief) normalise() {
	n := len(b.mean)
	x, mean := make([]float64, n), 0.0
	for k, e := range b.mean {
		x[k] = 1 / max(1+e, leastFactor)
		mean += x[k] / float64(n)
	}
	u := mat.NewSymDense(n, nil) // covariance of u
	for i := range n {
		for j := i; j < n; j++ {
			u.SetSym(i, j, b.covariance.At(i, j)*x[i]*x[j])
		}
	}
	weight := mat.NewVecDense(n, nil) // c/n
	for k := range x {
		weight.SetVec(k, x[k]/mean/float64(n))
		b.mean[k] = mean/x[k] - 1
	}
	var uw mat.VecDense
	uw.MulVec(u, weight)
	common := mat.Dot(weight, &uw)
	for i := range n {
		for j := i; j < n; j++ {
			v := u.At(i, j) - uw.AtVec(i) - uw.AtVec(j) + common
			b.covariance.SetSym(i, j, v*(1+b.mean[i])*(1+b.mean[j]))
		}
	}
}

// leastFactor bounds 1+e: no frame is ten times as bright as it should be.
const leastFactor = 0.1

// errors are the standard errors of c.
func (b *belief) errors() []float64 {
	all := make([]float64, len(b.mean))
	for k, e := range b.mean {
		all[k] = math.Sqrt(max(0, b.covariance.At(k, k))) / ((1 + e) * (1 + e))
	}
	return all
}

// c are the throughputs.
func (b *belief) c() []float64 {
	all := make([]float64, len(b.mean))
	for k, e := range b.mean {
		all[k] = 1 / max(1+e, leastFactor)
	}
	return all
}

// detrended is the rms of e's error, less its mean and linear trend in time.
func (b *belief) detrended(times []float64) float64 {
	n := len(b.mean)
	level, slope := mat.NewVecDense(n, nil), mat.NewVecDense(n, nil)
	mean := 0.0
	for _, t := range times {
		mean += t / float64(n)
	}
	for k, t := range times {
		level.SetVec(k, 1/math.Sqrt(float64(n)))
		slope.SetVec(k, t-mean)
	}
	left := mat.Trace(b.covariance) - mat.Inner(level, b.covariance, level)
	if length := mat.Norm(slope, 2); length > 0 {
		slope.ScaleVec(1/length, slope)
		left -= mat.Inner(slope, b.covariance, slope)
	}
	return math.Sqrt(max(0, left) / float64(max(1, n)))
}
