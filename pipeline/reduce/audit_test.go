package reduce_test

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// auditing is the nominal recipe with repairs.
func auditing(t *testing.T) *reduce.Recipe {
	t.Helper()
	path := filepath.Join(t.TempDir(), "repair.yaml")
	require.NoError(t, os.WriteFile(path, []byte("flat: {use: off}\narc: {use: off}\nthroughput: {use: off}\nrepair: {use: auto}\n"), 0o644))
	r, err := reduce.LoadRecipe(path)
	require.NoError(t, err)
	return r
}

// A night with two frames exchanged gives the cube of the night without the fault, but
// for the ledger, and says so; as labelled it does not.
func TestExchangedFramesArePutRight(t *testing.T) {
	field, err := trial.Square()
	require.NoError(t, err)
	n, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	fault := []rehearse.Fault{{Name: rehearse.Mislabel, Size: 2}}
	require.NoError(t, n.Rehearse(t.Context(), "right", rehearse.Options{Seed: 4, NoTruth: true}))
	require.NoError(t, n.Rehearse(t.Context(), "wrong", rehearse.Options{Seed: 4, NoTruth: true, Faults: fault}))
	opts := reduce.Options{Cube: true, Recipe: auditing(t)}
	right, err := n.Reduce(t.Context(), "right", opts)
	require.NoError(t, err)
	require.Empty(t, right.Run.Warnings)
	put, err := n.Reduce(t.Context(), "wrong", opts)
	require.NoError(t, err)
	require.Zero(t, put.Run.Exit)
	require.Equal(t, 2, put.Ledger.Count(product.Relabelled))
	require.Len(t, put.Run.Warnings, 2)
	require.Contains(t, put.Run.Warnings[0], "but shows the mask of step")
	require.Equal(t, right.Run.Quality, put.Run.Quality, "the same cube")
	report, err := os.ReadFile(filepath.Join(n.Run("wrong"), "report.html"))
	require.NoError(t, err)
	require.Contains(t, string(report), "used for step")

	require.NoError(t, os.RemoveAll(n.Run("wrong")))
	opts.AsLabelled = true
	kept, err := n.Reduce(t.Context(), "wrong", opts)
	require.NoError(t, err)
	require.Zero(t, kept.Ledger.Count(product.Relabelled))
	require.Contains(t, strings.Join(kept.Run.Warnings, "\n"), "used as labelled")
	require.Greater(t, *kept.Run.Quality.DarkChi2Heldout, 1.1**right.Run.Quality.DarkChi2Heldout)
	run, err := product.ReadRun(filepath.Join(n.Run("wrong"), product.RunFile))
	require.NoError(t, err)
	require.NotNil(t, run.Audit)
}
