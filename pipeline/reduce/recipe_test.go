package reduce

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
)

// The embedded recipe says what an empty one means.
func TestDefaultRecipe(t *testing.T) {
	r, err := LoadRecipe(DefaultRecipe)
	require.NoError(t, err)
	empty, err := parseRecipe("empty", []byte("detector: {use: auto}\n"))
	require.NoError(t, err)
	require.Len(t, r.SHA, 64)
	require.NotEqual(t, r.SHA, empty.SHA)
	empty.SHA, empty.Name = r.SHA, r.Name
	require.Equal(t, r, empty)
	require.Equal(t, DetectorRecipe{Use: "auto", ClipSigma: 4, HotSigma: 8, DeadBelow: 0.5}, r.Detector)
	grid := instrument.Grid{FirstNM: 500, StepNM: 0.5, Count: 10}
	require.Equal(t, grid, r.grid(&instrument.Profile{Grid: grid}))
}

func TestRecipeGrid(t *testing.T) {
	path := filepath.Join(t.TempDir(), "r.yaml")
	require.NoError(t, os.WriteFile(path, []byte("grid: {use: auto, first_nm: 510, step_nm: 0.4, count: 20}\n"), 0o644))
	r, err := LoadRecipe(path)
	require.NoError(t, err)
	require.Equal(t, path, r.Name)
	require.Equal(t, instrument.Grid{FirstNM: 510, StepNM: 0.4, Count: 20}, r.grid(&instrument.Profile{}))
	r.Grid.Axis, r.Grid.Spacing = instrument.Air, instrument.Logarithmic
	require.Equal(t, instrument.Grid{FirstNM: 510, StepNM: 0.4, Count: 20, Axis: instrument.Air, Spacing: instrument.Logarithmic}, r.grid(&instrument.Profile{}))
}

func TestRecipeRefusals(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"flats: {use: off}", "r.yaml:1: flats"},
		{"flat: {use: off, x: 1}", "flat.x"},
		{"flat: {use: flat.fits}", "flat.use"},
		{"\narc: {use: arcs.csv}", "r.yaml:2: arc.use"},
		{"sky: {use: blind}", `sky.use: "blind"`},
		{"sky: {use: off, rows: [[3, 9]]}", "sky.rows: the sky is off, so that naming it has no effect; write use: auto"},
		{"sky: {use: auto, elements: [[3, 9], [12, 11]]}", "sky.elements[1]: 12 to 11 is no range"},
		{"sky: {use: auto, rows: [[-1, 9]]}", "sky.rows[0]"},
		{"sky: {use: auto, rows: [4, 9]}", "sky.rows[0]"},
		{"flux: {use: maybe}", "flux.use"},
		{"flux: {use: off, star: s.csv}", "flux.use: off leaves the other keys of flux without effect"},
		{"flux: {use: star/cube.fits}", "flux.star"},
		{"flux: {use: star/cube.fits, star: s.csv, ra_deg: 12.5}", "flux.dec_deg: a position has both ra_deg and dec_deg, degrees"},
		{"flux: {use: star/cube.fits, star: s.csv, ra_deg: 361, dec_deg: 2}", "flux.ra_deg"},
		{"flux: {use: star/cube.fits, star: s.csv, ra_deg: '08:13:12', dec_deg: 2}", "flux.ra_deg"},
		{"flux: {use: star/cube.fits, star: s.csv, radius_arcsec: -1}", "flux.radius_arcsec"},
		{"flux: {use: auto}", "flux.star"},
		{"flux: {use: auto, star: s.csv, ra_deg: 12.5, dec_deg: 3}", "flux.ra_deg: a position finds the star in a cube; with use: auto"},
		{"throughput: {use: maybe}", "throughput.use"},
		{"repair: {use: yes}", "repair.use"},
		{"detector: {use: maybe}", "detector.use"},
		{"detector: {use: auto, clip_sigma: 1}", "detector.clip_sigma"},
		{"detector: {use: auto, hot_sigma: 2}", "detector.hot_sigma"},
		{"detector: {use: auto, dead_below: 1.5}", "detector.dead_below"},
		{"detector: {use: auto, clip_sigma: .nan}", "detector.clip_sigma"},
		{"grid: {use: auto, first_nm: 500}", "grid.step_nm"},
		{"grid: {use: auto, axis: awav}", "grid.axis"},
		{"grid: {use: auto, spacing: log}", "grid.spacing"},
		{"grid: {use: auto, first_nm: 500, step_nm: 1, count: 10, axis: air}", "grid.axis"},
		{"grid: {use: auto, first_nm: 500, step_nm: -1, count: 3}", "grid.step_nm"},
		{"grid: {use: auto, first_nm: 500, step_nm: 1, count: 1}", "grid.count"},
		{"grid: {use: off, first_nm: 500, step_nm: 1, count: 10}", "grid.use"},
		{"grid: {use: off}\n---\ngrid: {use: off}", "r.yaml"},
		{"grid: {use: auto, first_nm: 150, step_nm: 1, count: 10, axis: awav}", "grid.first_nm: wavelengths in air are not defined below 200 nm"},
		{"grid: {use: auto, first_nm: 5, step_nm: 6, count: 10, spacing: log}", "grid.step_nm: a logarithmic step"},
		{"grid: {use: auto, frame: sun}", "grid.frame"},
		{"grid: {use: auto, refraction: yes}", "grid.refraction"},
		{"grid: {use: auto, guide_nm: 500}", "grid.guide_nm: without refraction no wavelength is moved"},
		{"grid: {use: auto, refraction: auto, guide_nm: 50}", "grid.guide_nm"},
		{"grid: {use: auto, onto: run}", `grid.onto: "run" is no cube.fits`},
		{"grid: {use: off, onto: cube.fits}", "grid.onto: the grid is that of the cube"},
		{"grid: {use: auto, onto: cube.fits, first_nm: 500, step_nm: 1, count: 10}", "grid.onto: the grid is that of the cube"},
		{"- 1", "r.yaml"},
	} {
		r, err := parseRecipe("r.yaml", []byte(c.text))
		require.Nil(t, r, c.text)
		require.ErrorContains(t, err, c.want, c.text)
		var e *config.Error
		require.ErrorAs(t, err, &e)
	}
	_, err := LoadRecipe("no-such-recipe")
	require.ErrorIs(t, err, os.ErrNotExist)
}

// No text makes the reader panic; what is read has sound values; what is refused
// gives no recipe and names the file.
func FuzzRecipe(f *testing.F) {
	text, err := configs.Read(configs.Recipes, DefaultRecipe)
	require.NoError(f, err)
	f.Add(text)
	for _, s := range []string{
		"", "detector: {use: off}", "grid: {use: auto, first_nm: 500, step_nm: 0.5, count: 3}", "flat: {use: auto}",
		"detector: {use: auto, clip_sigma: 1e400}", "a: &a [*a]", "grid: {use: auto, count: 99999999999999999999}", "detector:\n\tuse: auto",
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		r, err := parseRecipe("r.yaml", data)
		if err != nil {
			require.Nil(t, r)
			require.Contains(t, err.Error(), "r.yaml")
			return
		}
		d := r.Detector
		require.True(t, d.ClipSigma >= 2 && d.HotSigma >= 4 && d.DeadBelow >= 0 && d.DeadBelow <= 1)
		g := r.grid(&instrument.Profile{Grid: instrument.Grid{FirstNM: 1, StepNM: 1, Count: 2}})
		require.True(t, g.FirstNM > 0 && g.StepNM > 0 && g.Count >= 2)
	})
}

// The recipe "nominal" takes the profile's word for wavelengths, trace and response, and
// the frames as steady and whole.
func TestNominalRecipe(t *testing.T) {
	r, err := LoadRecipe("nominal")
	require.NoError(t, err)
	want, err := LoadRecipe(DefaultRecipe)
	require.NoError(t, err)
	require.Equal(t, StageRecipe{Use: "auto"}, want.Arc)
	require.Equal(t, StageRecipe{Use: "auto"}, want.Flat)
	require.NotEqual(t, want.SHA, r.SHA)
	require.Equal(t, StageRecipe{Use: "auto"}, want.Throughput)
	require.Equal(t, StageRecipe{Use: "auto"}, want.Repair)
	want.Arc.Use, want.Flat.Use, want.Throughput.Use, want.Repair.Use = "off", "off", "off", "off"
	want.SHA, want.Name = r.SHA, r.Name
	require.Equal(t, want, r)
}
