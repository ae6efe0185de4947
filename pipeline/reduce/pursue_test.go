package reduce_test

import (
	"context"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// On a night with cosmic rays 99 % of the hits above eight standard errors are repaired
// or flagged, almost nothing else is, and pulls keep their scatter; on a clean night
// nothing is repaired. internal/validate looks at more nights.
func TestCosmicNight(t *testing.T) {
	f, err := trial.Struckable(127, 16)
	require.NoError(t, err)
	ctx := context.Background()
	n, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Repair.Use = "auto"
	opts := reduce.Options{Cube: true, Elements: true, Recipe: recipe}

	require.NoError(t, n.Rehearse(ctx, trial.Twin, rehearse.Options{Seed: 1, Noiseless: true, NoTruth: true}))
	r, err := n.Reduce(ctx, trial.Twin, opts)
	require.NoError(t, err)
	require.Zero(t, *r.Run.Quality.Hits)

	require.NoError(t, n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 1, Faults: []rehearse.Fault{{Name: rehearse.Cosmic, Size: 0.5}}}))
	strikes, err := n.TrueStrikes(trial.Noisy)
	require.NoError(t, err)
	single, err := n.Strike(trial.Noisy, 2e-4, func(r *rand.Rand) float64 { return 200 + 400*r.Float64() }, 1)
	require.NoError(t, err)
	r, err = n.Reduce(ctx, trial.Noisy, opts)
	require.NoError(t, err)
	require.Empty(t, r.Degraded)
	c, err := n.CountStruck(trial.Noisy, append(strikes, single...), nil)
	require.NoError(t, err)
	require.Greater(t, c.Strong, 700)
	for _, f := range c.StruckFindings("cosmic") {
		t.Log(f)
		require.True(t, f.OK, f)
	}
	require.Equal(t, r.Run.Quality.Restored, *r.Run.Quality.Hits)
	pulls, _, err := n.PullsOf(1)
	require.NoError(t, err)
	for _, f := range pulls.FaultyFindings("cosmic") {
		t.Log(f)
		require.True(t, f.OK, f)
	}
}
