package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

func TestStuckNights(t *testing.T) {
	for i, field := range fields {
		t.Run(field.name, func(t *testing.T) {
			f, err := field.make()
			require.NoError(t, err)
			require.NoError(t, f.Stick(uint64(1+i), 30))
			night, err := f.Plan(context.Background(), t.TempDir())
			require.NoError(t, err)
			result, err := night.Make(context.Background(), trial.Noisy, rehearse.Options{Seed: uint64(31 + i)})
			require.NoError(t, err)
			require.Empty(t, result.Degraded)
			t.Log(result.Run.Warnings)
			c, err := trial.ReadCube(night.CubePath(trial.Noisy))
			require.NoError(t, err)
			truth, err := c.ReadTruth(night.TruthPath(trial.Noisy))
			require.NoError(t, err)
			p := trial.NewStuckPulls(c, truth, night.Seq, 1)
			for _, m := range []trial.Moments{p.Lacking, p.Bright, p.Others} {
				t.Logf("%d: mean %.4f std %.4f", m.N, m.Mean(), m.Std())
			}
		})
	}
}
