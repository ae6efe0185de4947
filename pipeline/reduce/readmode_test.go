package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
)

// Errors hold whatever way the infrared array is read: with reads in groups, whose
// photons count as 0.74 of themselves, and with a ramp's, as 1.13. A VARIANCE a tenth
// too small does not pass.
func TestPullsOfReadModes(t *testing.T) {
	for i, mode := range []instrument.ReadMode{
		{Kind: instrument.FowlerRead, Reads: 8, Spacing: 0.1},
		{Kind: instrument.RampRead, Reads: 16},
	} {
		t.Run(mode.Kind, func(t *testing.T) {
			f, err := trial.Diagonal()
			require.NoError(t, err)
			f.Profile.Detector.ReadMode = &mode
			night, _, err := f.Pair(context.Background(), t.TempDir(), uint64(31+i))
			require.NoError(t, err)
			require.Equal(t, mode, night.Seq.Profile.Detector.Mode())
			pulls, _, err := night.PullsOf(1)
			require.NoError(t, err)
			hold(t, pulls.Findings(mode.Kind))
			small, _, err := night.PullsOf(0.9)
			require.NoError(t, err)
			require.False(t, trial.AllHold(small.Findings(mode.Kind)), "VARIANCE a tenth too small passes")
		})
	}
}
