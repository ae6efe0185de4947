package plan_test

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/plan"
)

// A sequence against the target it was made from is the same plan; against another, the
// ratio is that of the two forecasts.
func TestComparePlans(t *testing.T) {
	ctx := context.Background()
	target, profile := small(t)
	s, summary := build(t, target, profile)
	dir := filepath.Join(t.TempDir(), "sequence")
	require.NoError(t, s.Write(ctx, dir))
	text, err := s.Target.YAML()
	require.NoError(t, err)
	file := filepath.Join(t.TempDir(), "again.yaml")
	require.NoError(t, os.WriteFile(file, text, 0o644))
	c, err := plan.Compare(ctx, dir, file, "optical")
	require.NoError(t, err)
	require.InDelta(t, 1, c.Minutes, 1e-12)
	require.InDelta(t, summary.Minutes, c.A.Minutes, 1e-9)
	require.Equal(t, *summary.Forecast, *c.A.Forecast)
	for _, x := range c.SNR {
		require.InDelta(t, 1, x.Ratio, 1e-12)
	}
	require.Contains(t, c.Verdict, "B gives 1.00 times the S/N of A")

	c, err = plan.Compare(ctx, dir, "demo", "optical")
	require.NoError(t, err)
	require.Empty(t, c.SNR)
	require.Contains(t, c.Verdict, "do not both say")
	require.Contains(t, c.String(), "m-sequence")

	_, err = plan.Compare(ctx, dir, "demo", "")
	require.ErrorContains(t, err, "give --profile")
}
