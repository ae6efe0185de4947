package reduce_test

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// All masks flipped leave the dark columns dark; the arcs' direction names them.
func TestFlippedNightIsNamed(t *testing.T) {
	field, err := trial.Lamps()
	require.NoError(t, err)
	n, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	flip := []rehearse.Fault{{Name: rehearse.Flip}}
	got, err := n.Make(t.Context(), "flipped", rehearse.Options{Seed: 1, NoTruth: true, Faults: flip})
	require.NoError(t, err)
	require.Equal(t, reduce.ExitDegraded, got.Run.Exit)
	require.Contains(t, got.Degraded[0], "every mask flipped along the dispersion")
}
