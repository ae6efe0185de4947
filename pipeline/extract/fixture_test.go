package extract_test

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/combine"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// The reduction's report imports extract: only tests from outside the package may
// make runs, and hand them in.
func init() { extract.TinyRun, extract.TinyPair, extract.TinyCycles = tinyRun, tinyPair, tinyCycles }

// leaning is the tiny field with a slit and a trace that lean.
func leaning(t *testing.T) *trial.Field {
	t.Helper()
	field, err := trial.Tiny()
	require.NoError(t, err)
	field.Profile.Spectrograph.SlitTilt, field.Profile.Spectrograph.TraceTilt = 0.05, 0.02
	return field
}

// tinyPair makes two nights of it, the second with two cycles and so many elements and rows
// further on, two months later, and combines them in dir, as "all" of "run0" and "run1".
func tinyPair(t *testing.T, dir string, elements, rows float64, family string, v, dark int, change ...string) {
	t.Helper()
	field := leaning(t)
	field.SetCode(family, v, dark)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	for _, name := range change {
		changes[name](field, recipe)
	}
	other := field.Displaced(elements, rows)
	other.Target.Code.Cycles = 2
	other.Target.StartUTC = "2031-04-11T02:00:00Z"
	opts := combine.Options{Out: filepath.Join(dir, "all")}
	for i, f := range []*trial.Field{field, other} {
		night, err := f.Plan(t.Context(), filepath.Join(dir, fmt.Sprint("night", i)))
		require.NoError(t, err)
		require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 5 + uint64(i), NoTruth: true}))
		_, err = night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		run := filepath.Join(dir, fmt.Sprint("run", i))
		require.NoError(t, os.Rename(night.Run(trial.Noisy), run))
		opts.Runs = append(opts.Runs, run)
	}
	require.NoError(t, os.MkdirAll(opts.Out, 0o755))
	_, err = combine.Run(t.Context(), opts)
	require.NoError(t, err)
}

// tinyCycles makes a night of two cycles in dir, reduced at once as "both", and one by one
// and combined as "all".
func tinyCycles(t *testing.T, dir string) {
	t.Helper()
	field := leaning(t)
	field.Target.Code.Cycles = 2
	night, err := field.Plan(t.Context(), dir)
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 9, NoTruth: true}))
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	opts := combine.Options{Out: filepath.Join(dir, "all")}
	for name, cycles := range map[string][]int{"both": nil, "first": {1}, "second": {2}} {
		out := filepath.Join(dir, name)
		require.NoError(t, os.MkdirAll(out, 0o755))
		_, err := reduce.Run(t.Context(), reduce.Options{Night: night.Frames(trial.Noisy), Sequence: night.SequencePath(), Out: out, Recipe: recipe, Cube: true, Cycles: cycles})
		require.NoError(t, err)
	}
	opts.Runs = []string{filepath.Join(dir, "first"), filepath.Join(dir, "second")}
	require.NoError(t, os.MkdirAll(opts.Out, 0o755))
	_, err = combine.Run(t.Context(), opts)
	require.NoError(t, err)
}

// tinyRun makes a night of the tiny field, with a slit and a trace that lean, and
// reduces it with a recipe that change, if there is one, changes. It returns the run's
// folder.
func tinyRun(t *testing.T, family string, v, dark int, change ...string) string {
	t.Helper()
	field := leaning(t)
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
