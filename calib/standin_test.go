package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func anyPixel(int) bool { return true }

// A frame that is a multiple of the mean is found exactly, whatever the struck sample
// holds and whatever less than half of the light beside it does.
func TestStandInMultiple(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		mean := rapid.SliceOfN(rapid.Float32Range(50, 100), 11, 30).Draw(t, "mean")
		r := rapid.Float64Range(-2, 3).Draw(t, "ratio")
		x := rapid.IntRange(0, len(mean)-1).Draw(t, "x")
		frame := make([]float32, len(mean))
		for i, m := range mean {
			frame[i] = float32(r * float64(m))
		}
		frame[x] = 1e6
		value, variance, ok := DefaultStandIn().Estimate(frame, mean, anyPixel, x)
		require.True(t, ok)
		require.InDelta(t, r*float64(mean[x]), value, 1e-4)
		require.InDelta(t, 0, variance, 1e-8)
		// One neighbour of at least 5 holds less than half of the light.
		frame[max(x-1, 0)] = 5e5
		frame[x] = 1e6
		value, variance, ok = DefaultStandIn().Estimate(frame, mean, anyPixel, x)
		require.True(t, ok)
		require.InDelta(t, r*float64(mean[x]), value, 1e-4)
		if x > 0 {
			require.Greater(t, variance, 1e9, "a wild neighbour is not hidden")
		}
	})
}

// The variance by hand: residuals 1, -1, 2 and -2 about a ratio of 1.
func TestStandInVariance(t *testing.T) {
	frame := []float32{10, 11, 9, 500, 12, 8, 10}
	mean := []float32{10, 10, 10, 20, 10, 10, 10}
	value, variance, ok := StandIn{Reach: 3, Least: 4}.Estimate(frame, mean, anyPixel, 3)
	require.True(t, ok)
	require.Equal(t, 20.0, value)
	require.InDelta(t, (1+1+4+4)/5.0, variance, 1e-12)
}

func TestStandInTooFew(t *testing.T) {
	frame, mean := make([]float32, 20), make([]float32, 20)
	rule := DefaultStandIn()
	_, _, ok := rule.Estimate(frame, mean, anyPixel, 10)
	require.False(t, ok, "no light")
	for i := range mean {
		mean[i] = 1
	}
	few := func(x int) bool { return x < 8 }
	_, _, ok = rule.Estimate(frame, mean, few, 10)
	require.False(t, ok, "3 neighbours")
	_, _, ok = rule.Estimate(frame, mean, few, 9)
	require.True(t, ok, "4 neighbours")
}

// Errors over sigma, of 20000 independent rows with read and photon noise: below 1, as
// the variance counts a reading's noise. Where the frame's light differs in shape from
// the mean's - a line of its own, FWHM 3.2 pixels, anywhere near - they stay near 1.
// Figures 0.6 and 1.3; the scatter's own standard error is 0.5 % of it, times 3 for its
// long tails.
func TestStandInPulls(t *testing.T) {
	const rows = 20000
	r := rand.New(rand.NewPCG(97, 1))
	pulls := func(line float64) float64 {
		sum := 0.0
		for range rows {
			mean, frame, truth := make([]float32, 31), make([]float32, 31), make([]float64, 31)
			at := 15 + 10*(r.Float64()-0.5)
			for i := range mean {
				mean[i] = float32(200 + 5*float64(i))
				truth[i] = 0.7*float64(mean[i]) + line*gaussian(float64(i)-at, 3.2)
				frame[i] = float32(photons(r, truth[i]) + 4*r.NormFloat64())
			}
			value, variance, ok := DefaultStandIn().Estimate(frame, mean, anyPixel, 15)
			require.True(t, ok)
			sum += (value - truth[15]) * (value - truth[15]) / variance
		}
		return math.Sqrt(sum / rows)
	}
	alike, unlike := pulls(0), pulls(2000)
	t.Logf("scatter of pulls %.3f, with a line of its own %.3f", alike, unlike)
	require.Less(t, alike, 0.6)
	require.Less(t, unlike, 1.3)
}
