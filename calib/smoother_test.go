package calib

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// Against numpy's dense inverse, with gaps and unequal weights.
func TestCrosscheckSmoother(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 1))
	for _, period := range []float64{4, 30} {
		const n = 80
		values, variances := make([]float64, n), make([]float64, n)
		args := []string{fmt.Sprint(period), fmt.Sprint(n)}
		for i := range values {
			values[i] = math.Sin(float64(i)/7) + 0.1*rng.NormFloat64()
			variances[i] = 0.01 * (1 + 5*rng.Float64())
			if i < 3 || i%9 == 0 || i > 70 && i < 76 {
				variances[i] = 0
			}
		}
		for _, list := range [][]float64{values, variances} {
			for _, v := range list {
				args = append(args, fmt.Sprintf("%.17g", v))
			}
		}
		var want struct{ Curve, Variance []float64 }
		require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_smoother.py", args...)), &want))
		curve, variance := make([]float64, n), make([]float64, n)
		fit, err := Smoother{period}.Smooth(curve, variance, values, variances)
		require.NoError(t, err)
		require.InDeltaSlice(t, want.Curve, curve, 1e-7)
		freedom := 0.0
		for i, v := range want.Variance {
			require.InEpsilon(t, v, variance[i], 1e-6)
			if variances[i] > 0 {
				freedom += v / variances[i]
			}
		}
		require.InEpsilon(t, freedom, fit.Freedom, 1e-6)
	}
}

// A wave keeps 1/(1 + (Period/p)^6) of its amplitude (the docstring's figure): half
// at the period itself. Exact with sines in place of the ratio, for a long series.
func TestSmootherPassesWaves(t *testing.T) {
	const n = 4000
	values, variances, curve := make([]float64, n), make([]float64, n), make([]float64, n)
	for _, k := range []struct{ period, wave float64 }{{30, 30}, {30, 60}, {30, 120}, {60, 60}, {60, 30}} {
		for i := range values {
			values[i], variances[i] = math.Cos(2*math.Pi*float64(i)/k.wave), 2
		}
		_, err := Smoother{k.period}.Smooth(curve, make([]float64, n), values, variances)
		require.NoError(t, err)
		top, bottom := 0.0, 0.0
		for i := n / 4; i < n/4+1200; i++ { // whole waves, far from the ends
			top += curve[i] * values[i]
			bottom += values[i] * values[i]
		}
		exact := 1 / (1 + math.Pow(math.Sin(math.Pi/k.wave)/math.Sin(math.Pi/k.period), 6))
		require.InDelta(t, exact, top/bottom, 1e-6, "%v", k)
		require.InDelta(t, 1/(1+math.Pow(k.period/k.wave, 6)), top/bottom, 0.005, "%v", k)
	}
}

// Parabolas pass whole, through gaps and beyond the ends.
func TestSmootherKeepsParabolas(t *testing.T) {
	const n = 60
	values, variances, curve := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range values {
		x := float64(i)
		values[i] = 3 - 0.5*x + 0.02*x*x
		curve[i] = values[i]
		if i >= 10 && i < 50 && i%7 != 0 {
			variances[i] = 1 + x
		} else {
			curve[i] = math.NaN() // must not matter
		}
	}
	out, variance := make([]float64, n), make([]float64, n)
	fit, err := Smoother{25}.Smooth(out, variance, curve, variances)
	require.NoError(t, err)
	require.InDeltaSlice(t, values, out, 1e-6)
	require.Less(t, fit.Chi2, 1e-9)
	require.Greater(t, variance[0], 10*variance[30], "an extrapolation is uncertain")
}

// The stated variance against the scatter of N fits about the truth, averaged over
// the curve, at the period of least Risk: a sum of waves of 60 to 150 steps, as the
// efficiency of a flat may have. Nychka (1988) promises agreement of the average,
// not of each point.
func TestSmootherVarianceMonteCarlo(t *testing.T) {
	const n, trials = 400, 60
	rng := rand.New(rand.NewPCG(8, 8))
	truth, values, variances := make([]float64, n), make([]float64, n), make([]float64, n)
	curve, variance := make([]float64, n), make([]float64, n)
	for i := range truth {
		x := 2 * math.Pi * float64(i)
		truth[i] = 1 + 0.01*(math.Sin(x/60+1)+math.Sin(x/85)+math.Sin(x/150+2))
		variances[i] = 0.004 * 0.004
	}
	risk := map[float64]float64{}
	periods := []float64{30, 36, 42, 50, 60, 72, 85, 100, 120}
	sum := map[float64]float64{}
	for range trials {
		for i, v := range truth {
			values[i] = v + 0.004*rng.NormFloat64()
		}
		for _, p := range periods {
			fit, err := Smoother{p}.Smooth(curve, variance, values, variances)
			require.NoError(t, err)
			risk[p] += fit.Risk()
			for i, v := range truth {
				sum[p] += (curve[i] - v) * (curve[i] - v) / variance[i] / n / trials
			}
		}
	}
	best := periods[0]
	for _, p := range periods {
		if risk[p] < risk[best] {
			best = p
		}
	}
	t.Logf("least risk at period %g: squared error / stated variance = %.3f", best, sum[best])
	require.InDelta(t, 1, sum[best], 0.25)
	// Periods far from the best are not honest: the choice matters.
	require.Greater(t, sum[120.0], 2.0)
}

func TestSmootherRefuses(t *testing.T) {
	two := []float64{1, 2}
	for _, f := range []func() error{
		func() error { _, err := Smoother{30}.Smooth(two, two, two, two); return err },
		func() error { _, err := Smoother{30}.Smooth(two[:1], two, two, two); return err },
		func() error { v := make([]float64, 9); _, err := Smoother{2}.Smooth(v, v, v, v); return err },
		func() error { v := make([]float64, 9); _, err := Smoother{30}.Smooth(v, v, v, v); return err },
	} {
		require.Error(t, f())
	}
}
