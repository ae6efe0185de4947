package reduce_test

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Counts become flux by a coded star at another air mass: stars' spectra are those of the
// scene, pulls are normal; what is wanting is said.
func TestFluxNight(t *testing.T) {
	f, err := trial.Airy(false)
	require.NoError(t, err)
	dir := t.TempDir()
	flux, err := f.StarNight(t.Context(), filepath.Join(dir, "star"), 11.5, 1.15, 8)
	require.NoError(t, err)
	f.Target.Calibration.RefStar = &sequence.RefStarFrames{
		Name: "a star", Count: 3, DwellSeconds: 20, RADeg: f.Target.RADeg, DecDeg: f.Target.DecDeg + 18, Elements: [2]int{10, 36},
	}
	f.Scene.RefStar = &rehearse.RefStar{ABMag: 11.5, AtNM: 550, TemperatureK: 20000}
	night, err := f.Plan(t.Context(), dir)
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 9}))
	run := func(flux reduce.FluxRecipe) (*reduce.Result, error) {
		require.NoError(t, os.RemoveAll(night.Run(trial.Noisy)))
		recipe, err := f.OnSkyRecipe(reduce.SkyRecipe{Use: "auto"}, flux)
		require.NoError(t, err)
		return night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	}
	result, err := run(flux)
	require.NoError(t, err)
	require.Empty(t, result.Degraded)
	t.Logf("%+v", *result.Run.Flux)
	t.Logf("%+v", *result.Run.Sky)
	require.InDelta(t, 1.5, result.Run.Flux.Airmass, 0.1)
	require.InDelta(t, 1.15, result.Run.Flux.StarAirmass, 0.05)
	c, err := trial.ReadCube(night.CubePath(trial.Noisy))
	require.NoError(t, err)
	truth, err := night.FluxTruth(c, trial.Noisy)
	require.NoError(t, err)
	var all trial.Moments
	for i, v := range truth {
		if c.Good(i) && v == v {
			all.Add(float64(c.Signal[i]-v) / math.Sqrt(float64(c.Variance[i])))
		}
	}
	t.Logf("pulls %.4f +- %.4f of %d", all.Mean(), all.Std(), all.N)
	require.InDelta(t, 1, all.Std(), 0.05)
	for k := range f.Scene.Sources {
		text := ""
		for _, b := range night.StarRatios(c, &f.Scene.Sources[k], 5, 3) {
			text += fmt.Sprintf(" %.4f+-%.4f", b.Ratio, b.Error)
			if math.Abs(b.Ratio-1) > max(0.01, 5*b.Error) {
				t.Errorf("star %d, %g to %g nm: %.4f", k, b.FromNM, b.ToNM, b.Ratio)
			}
		}
		t.Logf("star %d:%s", k, text)
	}
	text, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.ReportFile))
	require.NoError(t, err)
	require.Contains(t, string(text), "Slit loss of the star")

	// The night's own frames of another star through a wide element say the same.
	coded := fluxFactors(t, night.CubePath(trial.Noisy))
	table := filepath.Join(dir, "wide.csv")
	source := f.Scene.RefStar.Source()
	require.NoError(t, trial.WriteFluxTable(table, &source, 350, 950))
	result, err = run(reduce.FluxRecipe{Use: "auto", Star: table})
	require.NoError(t, err)
	require.Empty(t, result.Degraded)
	t.Logf("%+v", *result.Run.Flux)
	wide, bands := fluxFactors(t, night.CubePath(trial.Noisy)), ""
	for from := 0; from < len(wide); from += 40 {
		ratio, n := 0.0, 0.0
		for l := from; l < min(from+40, len(wide)); l++ {
			ratio, n = ratio+wide[l]/coded[l], n+1
		}
		bands += fmt.Sprintf(" %.4f", ratio/n)
		require.InDelta(t, 1, ratio/n, 0.01, "voxels from %d on", from)
	}
	t.Logf("wide element over coded:%s", bands)
}
