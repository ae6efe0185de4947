package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/calib/physics"
)

// referenceStar is a hot black body of known flux, seen through air, slit and an
// instrument of a bumpy sensitivity; noise of the given size, relative to the counts.
func referenceStar(seed uint64, noise float64) (StarCounts, FluxTable, []float64) {
	rng := rand.New(rand.NewPCG(seed, 7))
	const n, first, step = 1000, 400.0, 0.5
	var table FluxTable
	for nm := 380.0; nm <= 930; nm++ {
		table.VacuumNm = append(table.VacuumNm, nm)
		table.Flux = append(table.Flux, 50*physics.PlanckEnergy(nm, 20000)/physics.PlanckEnergy(550, 20000))
	}
	star := StarCounts{Seconds: 30, Prior: make([]float64, n)}
	truth := make([]float64, n)
	for i := range n + 1 {
		star.Edges = append(star.Edges, first+step*float64(i))
	}
	for i := range n {
		nm := first + step*(float64(i)+0.5)
		star.Prior[i] = 800 * math.Exp(-math.Pow((nm-620)/180, 2))
		truth[i] = star.Prior[i] * (0.8 + 0.1*math.Sin(nm/60) + 0.0004*(nm-600))
		air := physics.AirTransmission(physics.RayleighExtinction(nm, 80000)+0.08, 1.4)
		slit := physics.StripFraction(1.1, 1.5, 0.1)
		counts := truth[i] * table.Mean(star.Edges[i], star.Edges[i+1]) * air * slit * star.Seconds * step
		sigma := noise * counts
		star.Counts = append(star.Counts, counts+sigma*rng.NormFloat64())
		star.Variance = append(star.Variance, sigma*sigma+1e-12*counts*counts)
		star.Transmission = append(star.Transmission, air)
		star.SlitFraction = append(star.SlitFraction, slit)
	}
	return star, table, truth
}

func smoothFit() SensitivityFit { return SensitivityFit{Period: 80, Sigmas: 4} }

// Without noise the curve is the truth; with noise it is better than a voxel and its errors
// hold: 60 stars, rms of the pulls over them all.
func TestSensitivityFit(t *testing.T) {
	star, table, truth := referenceStar(1, 0)
	s, err := smoothFit().Fit(star, table)
	require.NoError(t, err)
	for i, v := range truth {
		limit := 1e-3
		if i < 40 || i >= len(truth)-40 { // half a period: nothing holds the curve beyond the ends
			limit = 5e-3
		}
		require.InEpsilon(t, v, s.Value[i], limit, "voxel %d", i)
	}
	const stars = 60
	sum, count, spread := 0.0, 0.0, 0.0
	for seed := range uint64(stars) {
		star, table, truth := referenceStar(seed, 0.01)
		s, err := smoothFit().Fit(star, table)
		require.NoError(t, err)
		for i := 20; i < len(truth)-20; i += 40 { // half a period apart: independent
			pull := (s.Value[i] - truth[i]) / math.Sqrt(s.Variance[i])
			sum += pull * pull
			spread = max(spread, math.Abs(s.Value[i]/truth[i]-1))
			count++
		}
	}
	rms := math.Sqrt(sum / count)
	t.Logf("pulls rms %.3f of %.0f, worst miss %.4f", rms, count, spread)
	require.InDelta(t, 1, rms, max(0.1, 5/math.Sqrt(2*count)))
	require.Less(t, spread, 0.01)
}

// A cosmic ray, a line of the star and a band of the air do not move the curve: rejected
// or excluded.
func TestSensitivityOutliers(t *testing.T) {
	star, table, truth := referenceStar(5, 0.005)
	star.Counts[300] *= 1.5
	for i := range star.Counts {
		if nm := star.Edges[i]; nm > 759 && nm < 770 {
			star.Counts[i] *= 0.4
		}
	}
	rule := smoothFit()
	rule.Exclude = DefaultSensitivityFit().Exclude
	s, err := rule.Fit(star, table)
	require.NoError(t, err)
	require.GreaterOrEqual(t, s.Rejected, 1)
	require.Less(t, s.Rejected, 10)
	require.InDelta(t, 0.005, s.RMS, 0.0007) // 850 voxels: 2.4 % of 0.005, 5 of them
	require.InDelta(t, 1, s.Chi2, 0.25)
	for i, v := range truth {
		require.InEpsilon(t, v, s.Value[i], 0.012)
	}
}

// Counts turned to flux are the star's own, with errors that hold what the factor's add.
func TestFluxScale(t *testing.T) {
	star, table, _ := referenceStar(9, 0.005)
	star.SlitRelError = 0.02
	s, err := smoothFit().Fit(star, table)
	require.NoError(t, err)
	air := make([]float64, len(s.Value))
	for i := range air {
		air[i] = physics.AirTransmission(0.2, 1.1)
	}
	scale := s.Scale(star.Edges, air, 60)
	for l := range air {
		want := table.Mean(star.Edges[l], star.Edges[l+1])
		counts := s.Value[l] * want * air[l] * 60 * 0.5
		signal, variance, flags := []float32{float32(counts), 0}, []float32{100, 100}, make([]Flag, 2)
		scale.Apply(l, signal, variance, flags)
		require.InEpsilon(t, want, signal[0], 1e-6)
		per := want / counts
		require.InEpsilon(t, 100*per*per+want*want*scale.RelVariance[l], variance[0], 1e-6)
		require.InEpsilon(t, 100*per*per, variance[1], 1e-6)
		require.GreaterOrEqual(t, scale.RelVariance[l], 0.02*0.02)
		require.Less(t, scale.RelVariance[l], 0.0205*0.0205)
	}
}

// Beyond the star's table there is no flux: NaN and NoData. Inputs that cannot serve are
// refused with a sentence.
func TestSensitivityEnds(t *testing.T) {
	star, table, _ := referenceStar(2, 0.01)
	short := FluxTable{table.VacuumNm[:400], table.Flux[:400]} // to 779 nm
	s, err := smoothFit().Fit(star, short)
	require.NoError(t, err)
	scale := s.Scale(star.Edges, star.Transmission, 10)
	signal, variance, flags := []float32{5}, []float32{1}, []Flag{0}
	last := len(s.Value) - 1
	require.True(t, math.IsNaN(s.Value[last]))
	scale.Apply(last, signal, variance, flags)
	require.True(t, math.IsNaN(float64(signal[0])) && math.IsNaN(float64(variance[0])))
	require.Equal(t, NoData, flags[0])
	shorter := FluxTable{table.VacuumNm[:100], table.Flux[:100]}
	_, err = smoothFit().Fit(star, shorter)
	require.ErrorContains(t, err, "cover 158 of 1000 voxels (400 to 900 nm); give longer ones")
	star.Seconds = 0
	_, err = smoothFit().Fit(star, table)
	require.ErrorContains(t, err, "give the time of the star's exposure")
	star.Variance = star.Variance[1:]
	_, err = smoothFit().Fit(star, table)
	require.ErrorContains(t, err, "do not fit together")
}
