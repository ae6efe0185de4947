package reduce_test

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// fluxFactors reads the table of what turned counts into flux.
func fluxFactors(t *testing.T, path string) []float64 {
	t.Helper()
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close()
	done, err := product.ReadOnSky(f)
	require.NoError(t, err)
	require.NotNil(t, done.Flux)
	return done.Flux.Factor
}

// Counts become flux by the night's own frames of a star through one wide element, at
// another air mass and refracted: stars' spectra are those of the scene within 1 % from 400
// to 900 nm, whether or not the sky is taken off; the star is found where it truly stands,
// frames struck by cosmic rays.
func TestRefStarNight(t *testing.T) {
	f, err := trial.Visible()
	require.NoError(t, err)
	f.Target.Calibration.Flat.Count, f.Target.Calibration.Flat.CodedCycles, f.Target.Calibration.Arc.Count = 0, 0, 0
	f.Brighten(2.2) // so that their noise is a fifth of 1 % in the bluest band, too
	night, err := f.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.RehearseFaults(t.Context(), trial.Noisy, rehearse.Options{Seed: 12}, "cosmic=1"))
	star := filepath.Join(night.Frames(trial.Noisy), rehearse.TruthFolder, "refstar_flux.csv")
	flux := reduce.FluxRecipe{Use: "auto", Star: star}
	run := func(sky string, workers int) *reduce.Result {
		require.NoError(t, os.RemoveAll(night.Run(trial.Noisy)))
		recipe, err := f.OnSkyRecipe(reduce.SkyRecipe{Use: sky}, flux)
		require.NoError(t, err)
		result, err := night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe, Workers: workers})
		require.NoError(t, err)
		require.Empty(t, result.Degraded)
		return result
	}
	run("off", 1)
	without := fluxFactors(t, night.CubePath(trial.Noisy))
	result := run("auto", 2)
	require.Equal(t, without, fluxFactors(t, night.CubePath(trial.Noisy)), "the flux depends on the sky of the cube")
	report := result.Run.Flux
	t.Logf("%+v", *report)
	require.Equal(t, 4, report.Frames)
	require.InDelta(t, 1.40, report.StarAirmass, 0.02)
	require.InDelta(t, 1.49, report.Airmass, 0.02)
	require.False(t, report.ElementAssumed)
	// The telescope is guided at 600 nm, and places are those of light of 650 nm.
	require.InDelta(t, 23.237, report.Element, max(0.05, 5*report.ElementError))
	require.Less(t, report.ElementError, 0.05)

	c, err := trial.ReadCube(night.CubePath(trial.Noisy))
	require.NoError(t, err)
	for k := range f.Scene.Sources {
		text := ""
		for _, b := range night.StarRatios(c, &f.Scene.Sources[k], 5, 3) {
			text += fmt.Sprintf(" %.4f+-%.4f", b.Ratio, b.Error)
			require.Less(t, 5*b.Error, 0.01, "the night is too faint to tell 1 %%")
			if math.Abs(b.Ratio-1) > 0.01 {
				t.Errorf("star %d, %g to %g nm: %.4f", k, b.FromNM, b.ToNM, b.Ratio)
			}
		}
		t.Logf("star %d:%s", k, text)
	}
	text, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.ReportFile))
	require.NoError(t, err)
	require.Contains(t, string(text), "4 refstar frames of reference star with")
	require.Contains(t, string(text), "Star in the wide element")
}

// Without its frames the cube stays in counts, with exit 3 and a sentence.
func TestRefStarMissing(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	night, err := f.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 4, NoTruth: true}))
	table := filepath.Join(t.TempDir(), "star.csv")
	require.NoError(t, trial.WriteFluxTable(table, &f.Scene.Sources[0], 450, 550))
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Flux = reduce.FluxRecipe{Use: "auto", Star: table}
	result, err := night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	require.Contains(t, result.Degraded, "the flux was not calibrated: the sequence has no refstar step; plan some with calibration.refstar, or give flux: {use: cube.fits of a run on the star}")
}
