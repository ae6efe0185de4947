package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

// drifts are a scatter of 5 % and a trend of 30 %.
func drifts() []rehearse.Fault {
	return []rehearse.Fault{{Name: rehearse.Drift, Size: 0.05}, {Name: rehearse.Trend, Size: 0.3}}
}

// The dark columns of a field of sky lines, stars and a nebula measure a drift of 10 %
// rms as well as they say, and the cube is as good as that of a steady night.
func TestThroughputOfANight(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	f.Target.DwellSeconds *= 4 // a raw signal-to-noise ratio of 30
	f.Target.Calibration.Dark.DwellSeconds = f.Target.DwellSeconds
	night, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	d, err := night.Drift(context.Background(), 3, drifts()...)
	require.NoError(t, err)
	t.Logf("%+v, rms %.3f of the steady night's, %.3f uncorrected; %s", *d.C, d.Corrected/d.Steady, d.Raw/d.Steady, d.Result.Run.Throughput.Verdict)
	// 62 differences: 5 standard errors of an rms are 45 %.
	require.InEpsilon(t, d.C.Predicted, d.C.Measured, 0.45)
	require.Less(t, d.C.Measured, 0.1*d.C.True)
	require.Less(t, d.Corrected, 1.05*d.Steady)
	require.Greater(t, d.Raw, 2*d.Steady, "the drift would have shown")
	require.InDelta(t, 1, d.Pulls.All.Std(), 0.05)
	require.InDelta(t, 1, *d.Result.Run.Quality.DarkChi2Heldout, 0.05)
	q := d.Result.Run.Quality
	require.InDelta(t, d.C.True, *q.ThroughputRMS, 5e-3)
	require.InDelta(t, d.C.Predicted, *q.ThroughputErr, 1e-9)
	require.Empty(t, d.Result.Run.Warnings)
	require.Empty(t, d.Result.Run.Throughput.Terms)
	step := d.Result.Run.Throughput.HeldOut[0]
	require.True(t, step.Kept)
	require.Less(t, step.After, 1.2)
	require.Greater(t, step.Before, 3.0)
}
