package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

// noiselessCube reduces a night without noise.
func noiselessCube(t *testing.T, f *trial.Field) (*trial.Cube, []float32) {
	t.Helper()
	night, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	_, err = night.Make(context.Background(), trial.Twin, rehearse.Options{Seed: 4, Noiseless: true})
	require.NoError(t, err)
	cube, err := trial.ReadCube(night.CubePath(trial.Twin))
	require.NoError(t, err)
	truth, err := cube.ReadTruth(night.TruthPath(trial.Twin))
	require.NoError(t, err)
	return cube, truth
}

// Without noise only interpolation parts the cube from the truth: less than 0.5 %
// of a line's peak.
func TestInterpolation(t *testing.T) {
	for _, field := range fields {
		t.Run(field.name, func(t *testing.T) {
			f, err := field.make()
			require.NoError(t, err)
			cube, truth := noiselessCube(t, f)
			hold(t, trial.InterpolationFindings(field.name, cube, truth))
			// The check sees a cube that is shifted by a twentieth of a voxel.
			shifted := *cube
			shifted.Signal = append([]float32(nil), cube.Signal...)
			plane := cube.N * cube.Rows
			for i := range len(shifted.Signal) - plane {
				shifted.Signal[i] += 0.05 * (cube.Signal[i+plane] - cube.Signal[i])
			}
			require.False(t, trial.AllHold(trial.InterpolationFindings(field.name, &shifted, truth)))
		})
	}
}

// Flux is conserved to 1e-6, from the scene to the cube, where all light is in the
// cube (see trial.Field.Enclose).
func TestFlux(t *testing.T) {
	for _, field := range fields {
		t.Run(field.name, func(t *testing.T) {
			f, err := field.make()
			require.NoError(t, err)
			f.Enclose()
			cube, truth := noiselessCube(t, f)
			hold(t, trial.FluxFindings(field.name, cube, truth))
		})
	}
}
