package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Bias frames after lamp frames with a share of 0.3 % of their charge, levels wrong
// by some tenths of an electron, and struck pixels: N = 100 measurements, their mean
// and their scatter against the stated error.
func TestPersistence(t *testing.T) {
	const trials, frames, pixels, share, read = 100, 3, 2000, 0.003, 3.0
	rng := rand.New(rand.NewPCG(8, 3))
	residual, variance, before := make([]float32, pixels), make([]float32, pixels), make([]float32, pixels)
	flags := make([]Flag, pixels)
	var pull, pull2 float64
	var last Persistence
	for range trials {
		var fit PersistenceFit
		for range frames {
			level := rng.NormFloat64()
			for i := range residual {
				before[i] = float32(30000 * float64(i) / pixels)
				lag := share * float64(before[i])
				residual[i] = float32(level + lag + math.Sqrt(lag+read*read)*rng.NormFloat64())
				variance[i] = float32(lag + read*read)
				flags[i] = 0
				if i%211 == 0 && i < 1000 {
					residual[i] += 20000
				}
				if i%307 == 0 {
					residual[i], flags[i] = float32(math.NaN()), BadPixel
				}
			}
			fit.Add(residual[:pixels/2], variance, before, flags)
			fit.Add(residual[pixels/2:], variance[pixels/2:], before[pixels/2:], flags[pixels/2:])
			fit.NextFrame()
		}
		last = fit.Solve()
		p := (last.Share - share) / last.Error
		pull += p / trials
		pull2 += p * p / trials
	}
	t.Logf("last share %.6f +- %.6f, chi2 %.2f; pulls' mean %.2f, square %.2f", last.Share, last.Error, last.Chi2, pull, pull2)
	require.InDelta(t, 0, pull, 5/math.Sqrt(trials))
	require.InDelta(t, 1, pull2, 5*math.Sqrt(2.0/trials))
	require.Less(t, last.Error, 0.02*share)

	var none PersistenceFit
	require.True(t, math.IsNaN(none.Solve().Share))
	none.Add([]float32{float32(math.NaN())}, []float32{1}, []float32{1}, nil)
	require.True(t, math.IsNaN(none.Solve().Share))
}
