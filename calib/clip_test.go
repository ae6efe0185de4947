package calib

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
)

// The table of the reference values (numpy; influence function and Monte Carlo):
// p kept, variance of the kept, iterated to convergence 1/A.
func TestClippedVarianceTable(t *testing.T) {
	for _, c := range []struct{ c, kept, variance, iterated float64 }{
		{2, 0.954500, 0.773741, 1.354030},
		{2.5, 0.987581, 0.911256, 1.111186},
		{3, 0.997300, 0.973337, 1.030175},
		{4, 0.999937, 0.998929, 1.001133},
		{5, 0.999999, 0.999985, 1.000015},
	} {
		r := clippedVariance(c.c)
		require.InDelta(t, c.variance, r, 1e-6)
		require.InDelta(t, c.iterated, 1/(r*math.Erf(c.c/math.Sqrt2)), 3e-6)
		require.InDelta(t, c.kept, math.Erf(c.c/math.Sqrt2), 1e-6)
	}
}

// Variance of the clipped mean over the variance of one value, times n, against the
// same table, and the variance that Mean claims against the scatter of its means:
// N samples, standard error sqrt(2/N).
func TestClipMeanVarianceMonteCarlo(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 5))
	for _, c := range []struct {
		clip     Clip
		n        int
		iterated float64 // table, for n = 401; 0: no outside value
		slack    float64 // for the small-sample part of the claim, measured
	}{
		{Clip{Sigmas: 2, Noise: 3}, 401, 1.354030, 0},
		{Clip{Sigmas: 3, Noise: 3}, 401, 1.030175, 0},
		{Clip{Sigmas: 4, Noise: 3}, 401, 1.001133, 0},
		{Clip{Sigmas: 4}, 272, 0, 0.01},
		{Clip{Sigmas: 3}, 272, 0, 0.02},
		{Clip{Sigmas: 4, Noise: 3}, 10, 0, 0},
		{Clip{Sigmas: 4}, 10, 0, 0.05},
		{Clip{Sigmas: 4}, 5, 0, 0.25},
	} {
		const samples = 10000
		values, scratch := make([]float32, c.n), make([]float32, c.n)
		square, claimed := 0.0, 0.0
		for range samples {
			for i := range values {
				values[i] = float32(100 + 3*rng.NormFloat64())
			}
			e := c.clip.Mean(values, scratch)
			square += (e.Mean - 100) * (e.Mean - 100)
			claimed += e.Variance
		}
		tolerance := 5 * math.Sqrt(2.0/samples)
		t.Logf("clip %+v of %d: n var = %.4f, scatter/claim = %.4f +- %.4f", c.clip, c.n,
			square/samples/9*float64(c.n), square/claimed, math.Sqrt(2.0/samples))
		if c.iterated > 0 {
			require.InDelta(t, c.iterated, square/samples/9*float64(c.n), tolerance)
		}
		require.InDelta(t, 1, square/claimed, tolerance+c.slack, "%+v of %d", c.clip, c.n)
	}
}

// Outliers are left out, rounding to whole units does no harm, and the input stays.
func TestClipMeanOutliersAndIntegers(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 1))
	values, scratch := make([]float32, 300), make([]float32, 300)
	worst, claimed := 0.0, 0.0
	for range 200 {
		for i := range values {
			values[i] = float32(math.Round(1000.3 + 0.4*rng.NormFloat64()))
		}
		for i := range 15 {
			values[i*17] = float32(1100 + 2000*rng.Float64())
		}
		before := slices.Clone(values)
		e := Clip{Sigmas: 4, Floor: 0.5}.Mean(values, scratch)
		require.Equal(t, before, values)
		require.Equal(t, 285, e.Kept)
		worst = max(worst, math.Abs(e.Mean-1000.3))
		claimed = e.Variance
	}
	// sigma^2 = 0.16 + 1/12 of 285 values is 0.029^2; 5 sigma.
	require.Less(t, worst, 0.15)
	require.InDelta(t, 0.00087, claimed, 0.0003)
}

func TestClipMeanSmallAndOdd(t *testing.T) {
	nan := float32(math.NaN())
	scratch := make([]float32, 8)
	e := Clip{Sigmas: 4}.Mean([]float32{nan, nan}, scratch)
	require.True(t, math.IsNaN(e.Mean) && math.IsNaN(e.Variance) && e.Kept == 0)
	e = Clip{Sigmas: 4}.Mean([]float32{nan, 7}, scratch)
	require.Equal(t, 7.0, e.Mean)
	require.True(t, math.IsNaN(e.Variance))
	e = Clip{Sigmas: 4}.Mean([]float32{1, 2, 6}, scratch) // variance 7, by hand
	require.Equal(t, 3, e.Kept)
	require.InDelta(t, 3, e.Mean, 1e-12)
	require.InDelta(t, 7.0/3, e.Variance, 1e-12)
	e = Clip{Sigmas: 4, Noise: 1}.Mean([]float32{10, 11, 500}, scratch) // known noise clips even three
	require.Equal(t, 2, e.Kept)
	require.InDelta(t, 10.5, e.Mean, 1e-9)
	e = Clip{Sigmas: 4}.Mean([]float32{5, 5, 5, 5, 5, 5}, scratch)
	require.Equal(t, 6, e.Kept)
	require.Equal(t, 5.0, e.Mean)
	require.Zero(t, e.Variance)
	e = Clip{Sigmas: 1, Noise: 0.1}.Mean([]float32{0, 0, 10, 10}, scratch) // nothing near the median 5
	require.Equal(t, 0, e.Kept)
	require.Equal(t, 5.0, e.Mean)
	require.True(t, math.IsNaN(e.Variance))
}

// 1.482602 (reference table) and the exact variance of the median of 9, 0.166101.
func TestRobustLevel(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	many := make([]float32, 200001)
	for i := range many {
		many[i] = float32(rng.NormFloat64())
	}
	_, scatter := RobustLevel(many, make([]float32, len(many)))
	require.InDelta(t, 1, scatter, 5*1.17/math.Sqrt(float64(len(many)))) // efficiency of the MAD 0.37
	const samples = 20000
	square := 0.0
	nine, scratch := make([]float32, 9), make([]float32, 9)
	for range samples {
		for i := range nine {
			nine[i] = float32(rng.NormFloat64())
		}
		level, _ := RobustLevel(nine, scratch)
		square += level * level
	}
	require.InDelta(t, 0.166101, square/samples, 0.166101*5*math.Sqrt(2.0/samples))
}

// The variance of the median of N normal values is pi/2 times that of their mean, N
// large (Kendall & Stuart, The Advanced Theory of Statistics, vol. 1, chapter 14, from
// memory). For N = 301 it is 0.3 % less.
func TestMedianVariance(t *testing.T) {
	const values, samples = 301, 20000
	rng := rand.New(rand.NewPCG(17, 3))
	v, scratch := make([]float32, values), make([]float32, values)
	var ofMedian, ofMean float64
	for range samples {
		sum := 0.0
		for i := range v {
			v[i] = float32(rng.NormFloat64())
			sum += float64(v[i]) / values
		}
		level, _ := RobustLevel(v, scratch)
		ofMedian += level * level / samples
		ofMean += sum * sum / samples
	}
	const five = 5 * 0.01 // standard error of either variance: sqrt(2/samples)
	t.Logf("variance of the median over 1/N: %.4f (pi/2 = %.4f), of the mean %.4f", ofMedian*values, math.Pi/2, ofMean*values)
	require.InEpsilon(t, 1, ofMean*values, five)
	require.InEpsilon(t, math.Pi/2, ofMedian*values, five)
}

// A master bias of 20 frames: cosmic rays leave no trace, the variance is sigma^2/20.
func TestClipStack(t *testing.T) {
	const frames, pixels = 20, 4000
	rng := rand.New(rand.NewPCG(11, 12))
	stack := make([][]float32, frames)
	for k := range stack {
		stack[k] = make([]float32, pixels)
		for x := range stack[k] {
			stack[k][x] = float32(500 + float64(x%7) + 4*rng.NormFloat64())
			if rng.IntN(300) == 0 {
				stack[k][x] += 3000
			}
		}
	}
	mean, variance := make([]float32, pixels), make([]float32, pixels)
	Clip{Sigmas: 4, Noise: 4}.Stack(mean, variance, stack)
	chi := 0.0
	for x := range mean {
		d := float64(mean[x]) - 500 - float64(x%7)
		chi += d * d / float64(variance[x])
		require.InDelta(t, 16.0/frames, float64(variance[x]), 0.3)
	}
	require.InDelta(t, 1, chi/pixels, 5*math.Sqrt(2.0/pixels))
}
