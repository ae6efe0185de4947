package reduce

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// evenTimes are n times from -0.5 to 0.5.
func evenTimes(n int) []float64 {
	t := make([]float64, n)
	for k := range t {
		t[k] = float64(k)
	}
	return normalTimes(t)
}

// A measurement on any scale is believed by its error: one without error is taken over,
// one of a large error leaves the belief alone, and of two alike each counts half.
func TestBeliefLearns(t *testing.T) {
	const n = 12
	r := rand.New(rand.NewPCG(1, 2))
	m := &relative{c: make([]float64, n), err: make([]float64, n)}
	mean := 0.0
	for k := range m.c {
		m.c[k] = 7 * (1 + 0.05*r.NormFloat64()) // on a scale of its own
		mean += m.c[k] / n
	}
	set := func(relativeError float64) {
		for k := range m.err {
			m.err[k] = 7 * relativeError
		}
	}
	for _, c := range []struct{ err, tolerance float64 }{{1e-6, 1e-6}, {1e-3, 2e-3}} {
		b := newBelief(evenTimes(n))
		set(c.err)
		require.NoError(t, b.learn(m))
		b.normalise()
		for k, got := range b.c() {
			require.InDelta(t, m.c[k]/mean, got, c.tolerance)
		}
		require.InEpsilon(t, c.err*math.Sqrt(1-1.0/n), rmsOf(b.errors()), 0.05, "errors are the measurement's")
	}
	b := newBelief(evenTimes(n))
	set(100)
	require.NoError(t, b.learn(m))
	for _, e := range b.mean {
		require.Less(t, math.Abs(e), 1e-3)
	}

	once, twice := newBelief(evenTimes(n)), newBelief(evenTimes(n))
	set(0.01)
	require.NoError(t, twice.learn(m))
	require.NoError(t, twice.learn(m))
	set(0.01 / math.Sqrt2)
	require.NoError(t, once.learn(m))
	once.normalise()
	twice.normalise()
	require.InDeltaSlice(t, once.mean, twice.mean, 1e-6)
	require.InDeltaSlice(t, once.errors(), twice.errors(), 1e-6)
}

// A frame that was not measured follows the trend that the others show.
func TestBeliefOfAFrameWithoutMeasurement(t *testing.T) {
	const n, lacking = 20, 19
	times := evenTimes(n)
	m := &relative{c: make([]float64, n), err: make([]float64, n)}
	for k := range m.c {
		m.c[k], m.err[k] = 1/(1+0.2*times[k]), 1e-3
	}
	m.c[lacking], m.err[lacking] = math.NaN(), math.Inf(1)
	b := newBelief(times)
	require.NoError(t, b.learn(m))
	b.normalise()
	sigma := b.errors()
	require.InDelta(t, b.mean[0]+0.2, b.mean[lacking], 4*sigma[lacking])
	require.Greater(t, b.mean[lacking], 0.05, "the trend goes on")
	require.InDelta(t, 0.05, sigma[lacking], 0.02)
	require.Less(t, sigma[0], 5e-3)
}

// Measurements drawn from a belief give a chi-square of as many degrees of freedom;
// one that is off by three errors in every frame does not.
func TestBeliefCompares(t *testing.T) {
	const n, draws = 30, 400
	r := rand.New(rand.NewPCG(3, 4))
	b := newBelief(evenTimes(n))
	b.covariance.ScaleSym(0.04, b.covariance)
	var factor mat.Cholesky
	require.True(t, factor.Factorize(b.covariance))
	var l mat.TriDense
	factor.LTo(&l)
	sum, dof := 0.0, 0
	for range draws {
		z, e := mat.NewVecDense(n, nil), mat.NewVecDense(n, nil)
		for k := range n {
			z.SetVec(k, r.NormFloat64())
		}
		e.MulVec(&l, z)
		m := &relative{c: make([]float64, n), err: make([]float64, n)}
		for k := range n {
			m.err[k] = 0.01
			m.c[k] = 3 * (1/(1+e.AtVec(k)) + 0.01*r.NormFloat64())
			m.err[k] *= 3
		}
		chi2, d, err := b.compare(m)
		require.NoError(t, err)
		sum += chi2 / draws
		dof = d
	}
	require.Equal(t, n-1, dof)
	// The standard error of the mean is sqrt(2 dof/draws) = 0.38: 5 of them.
	require.InDelta(t, float64(dof), sum, 1.9)
	m := &relative{c: make([]float64, n), err: make([]float64, n)}
	for k := range n {
		m.c[k], m.err[k] = 1+0.1*float64(k%2*2-1), 0.01
	}
	chi2, _, err := b.compare(m)
	require.NoError(t, err)
	require.Greater(t, chi2, 2000.0/30)
}

// After normalise c has mean 1, and an error common to all c is no error.
func TestBeliefNormalised(t *testing.T) {
	const n = 9
	b := newBelief(evenTimes(n))
	for k := range b.mean {
		b.mean[k] = 0.3 + 0.05*float64(k)
		for j := k; j < n; j++ { // an error of the scale of c: de = (1+e) du
			b.covariance.SetSym(k, j, 0)
		}
	}
	for k := range b.mean {
		for j := k; j < n; j++ {
			b.covariance.SetSym(k, j, (1+b.mean[k])*(1+b.mean[j]))
		}
	}
	b.normalise()
	mean := 0.0
	for _, c := range b.c() {
		mean += c / n
	}
	require.InDelta(t, 1, mean, 1e-12)
	for _, s := range b.errors() {
		require.InDelta(t, 0, s, 1e-6)
	}
}

func rmsOf(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v * v
	}
	return math.Sqrt(sum / float64(len(x)))
}
