package extract_test

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// The reduction's report imports extract: only tests from outside the package may
// make runs, and hand them in.
func init() { extract.TinyRun = tinyRun }

// tinyRun makes a night of the tiny field, with a slit and a trace that lean, and
// reduces it with a recipe that change, if there is one, changes. It returns the run's
// folder.
func tinyRun(t *testing.T, family string, v, dark int, change ...string) string {
	t.Helper()
	field, err := trial.Tiny()
	require.NoError(t, err)
	field.Profile.Spectrograph.SlitTilt, field.Profile.Spectrograph.TraceTilt = 0.05, 0.02
	field.SetCode(family, v, dark)
	night, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 5, NoTruth: true}))
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	for _, name := range change {
		changes[name](field, recipe)
	}
	result, err := night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	require.Empty(t, result.Degraded)
	return night.Run(trial.Noisy)
}

// changes of the recipe by their names.
var changes = map[string]func(*trial.Field, *reduce.Recipe){
	"air, log": func(f *trial.Field, r *reduce.Recipe) {
		g := f.Profile.Grid
		r.Grid.FirstNM, r.Grid.StepNM, r.Grid.Count = g.FirstNM-0.1, g.StepNM, g.Count
		r.Grid.Axis, r.Grid.Spacing = instrument.Air, instrument.Logarithmic
	},
	// A guider at 380 nm is off by half an arc second and more.
	"refraction": func(_ *trial.Field, r *reduce.Recipe) {
		r.Grid.Refraction, r.Grid.GuideNM = "auto", 380
	},
	"barycentric": func(_ *trial.Field, r *reduce.Recipe) { r.Grid.Frame = "barycentric" },
}
