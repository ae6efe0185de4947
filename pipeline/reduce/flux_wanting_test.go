package reduce_test

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// unitOf is BUNIT of a cube's SIGNAL.
func unitOf(t *testing.T, path string) string {
	t.Helper()
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close()
	im, err := f.ImageNamed(product.Signal)
	require.NoError(t, err)
	unit, err := im.Header.Str("BUNIT")
	require.NoError(t, err)
	return unit
}

// What is wrong or wanting for the flux is said in a sentence that names it and the cure:
// before the work, as an error, where no flux can come of it; else with exit 3, the cube in
// counts or its flux in doubt.
func TestFluxWanting(t *testing.T) {
	f, err := trial.Airy(false)
	require.NoError(t, err)
	f.Profile.Site.Extinction = nil
	f.Target.Calibration.RefStar = &sequence.RefStarFrames{
		Name: "a star", Count: 2, DwellSeconds: 20, RADeg: f.Target.RADeg, DecDeg: f.Target.DecDeg + 18, Elements: [2]int{10, 36},
	}
	f.Scene.RefStar = &rehearse.RefStar{ABMag: 11.5, AtNM: 550, TemperatureK: 20000}
	dir := t.TempDir()
	night, err := f.Plan(t.Context(), dir)
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 21, NoTruth: true}))
	table := filepath.Join(dir, "star.csv")
	source := f.Scene.RefStar.Source()
	require.NoError(t, trial.WriteFluxTable(table, &source, 350, 950))
	run := func(flux reduce.FluxRecipe) (*reduce.Result, error) {
		require.NoError(t, os.RemoveAll(night.Run(trial.Noisy)))
		recipe, err := reduce.LoadRecipe("nominal")
		require.NoError(t, err)
		recipe.Flux = flux
		return night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	}

	// No extinction is known, and the star stood higher: a flux, in doubt.
	result, err := run(reduce.FluxRecipe{Use: "auto", Star: table})
	require.NoError(t, err)
	require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	require.Len(t, result.Degraded, 1)
	require.Regexp(t, `the profile has no site.extinction: the flux holds for the air mass of the star, 1\.[0-2]\d, while the science frames were taken at 1\.5\d`, result.Degraded[0])
	require.False(t, result.Run.Flux.Extinction)
	require.Equal(t, product.UnitFlux, unitOf(t, night.CubePath(trial.Noisy)))

	// A table too short for the grid.
	short := filepath.Join(dir, "short.csv")
	require.NoError(t, trial.WriteFluxTable(short, &source, 400, 520))
	_, err = run(reduce.FluxRecipe{Use: "auto", Star: short})
	require.ErrorContains(t, err, "short.csv: the table goes from 400 to 520 nm, which covers 47 of the cube's 201 wavelengths")
	require.ErrorContains(t, err, "give a longer one")
	require.NoFileExists(t, night.CubePath(trial.Noisy))

	// One that ends within it: no data where there is no flux.
	ends := filepath.Join(dir, "ends.csv")
	require.NoError(t, trial.WriteFluxTable(ends, &source, 350, 800))
	result, err = run(reduce.FluxRecipe{Use: "auto", Star: ends})
	require.NoError(t, err)
	require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	require.Contains(t, result.Degraded[0]+result.Degraded[1], "the flux of 41 of 201 wavelengths is not known, as the star's table, its spectrum or the extinction curve ends before them: their voxels are NODATA")
	c, err := trial.ReadCube(night.CubePath(trial.Noisy))
	require.NoError(t, err)
	plane := c.N * c.Rows
	for i := 190 * plane; i < 191*plane; i++ {
		require.NotZero(t, c.Flags[i]&product.FlagNoData)
		require.True(t, c.Signal[i] != c.Signal[i])
	}

	// A position in hours, of the star in a coded cube: this night's, in counts.
	_, err = run(reduce.FluxRecipe{Use: "off"})
	require.NoError(t, err)
	cube := filepath.Join(dir, "counts.fits")
	require.NoError(t, os.Rename(night.CubePath(trial.Noisy), cube))
	hours, dec := f.Target.RADeg/15, f.Target.DecDeg
	_, err = run(reduce.FluxRecipe{Use: cube, Star: table, RADeg: &hours, DecDeg: &dec})
	require.ErrorContains(t, err, "looks like hours: write ra_deg:")
	require.NoFileExists(t, night.CubePath(trial.Noisy))

	// Fewer frames of the star than planned, and none; they are the night's last.
	frames, err := filepath.Glob(filepath.Join(night.Frames(trial.Noisy), "*.fits"))
	require.NoError(t, err)
	for _, want := range []string{"1 of 2 refstar frames are missing", "the flux was not calibrated: all 2 refstar frames are missing; repeat them, or give flux: {use: cube.fits of a run on the star}"} {
		require.NoError(t, os.Remove(frames[len(frames)-1]))
		frames = frames[:len(frames)-1]
		result, err = run(reduce.FluxRecipe{Use: "auto", Star: table})
		require.NoError(t, err)
		require.Equal(t, reduce.ExitDegraded, result.Run.Exit) // the first for want of an extinction
		require.Contains(t, result.Run.Warnings, want)
	}
	require.Nil(t, result.Run.Flux)

	// Frames of which neither the air mass nor the time is known.
	for _, path := range frames {
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		data = bytes.Replace(data, []byte("AIRMASS ="), []byte("AIRMISS ="), 1)
		data = bytes.Replace(data, []byte("DATE-OBS="), []byte("DATE-OFF="), 1)
		require.NoError(t, os.WriteFile(path, data, 0o644))
	}
	result, err = run(reduce.FluxRecipe{Use: "auto", Star: table})
	require.NoError(t, err)
	require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	require.Regexp(t, `the flux was not calibrated: f\d+\.fits has no air mass, and no time at which the target is above the horizon; add AIRMASS or DATE-OBS`, result.Degraded[len(result.Degraded)-1])
	require.Nil(t, result.Run.Flux)
	require.Equal(t, product.UnitSignal, unitOf(t, night.CubePath(trial.Noisy)))
}
