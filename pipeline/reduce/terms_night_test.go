package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

// A slope over the band of 10 % rms, and sky lines that vary by as much apart from all
// else, are found in the dark columns and taken out: the cube is then as good as that of
// a steady night, with pulls of 1. Neither is found in place of the other.
func TestTermsOfANight(t *testing.T) {
	for _, x := range []struct {
		fault, term string
		worse       float64 // than the steady night if left as it is
	}{{rehearse.Colour, "slope over the band", 1.5}, {rehearse.SkyLines, "sky lines' part", 1.1}} {
		t.Run(x.fault, func(t *testing.T) {
			f, err := trial.Square()
			require.NoError(t, err)
			f.Target.DwellSeconds *= 4 // a raw signal-to-noise ratio of 30
			f.Target.Calibration.Dark.DwellSeconds = f.Target.DwellSeconds
			night, err := f.Plan(context.Background(), t.TempDir())
			require.NoError(t, err)
			d, err := night.Drift(context.Background(), 3, rehearse.Fault{Name: x.fault, Size: 0.1}, rehearse.Fault{Name: rehearse.Drift, Size: 0.03})
			require.NoError(t, err)
			run := d.Result.Run
			t.Logf("%+v, rms %.3f of the steady night's, %.3f uncorrected, pulls %.3f; %+v %s", *d.C, d.Corrected/d.Steady, d.Raw/d.Steady, d.Pulls.All.Std(), run.Throughput.HeldOut, run.Throughput.Verdict)
			require.Len(t, run.Throughput.Terms, 1)
			term := run.Throughput.Terms[0]
			require.Equal(t, x.term, term.Name)
			require.InDelta(t, 0.1, term.RMS, 0.03) // 63 draws
			require.Less(t, term.Error, 0.02)
			require.Less(t, d.Corrected, 1.05*d.Steady)
			require.Greater(t, d.Raw, x.worse*d.Steady, "the fault would have shown")
			require.InDelta(t, 1, d.Pulls.All.Std(), 0.05)
			require.InDelta(t, 1, *run.Quality.DarkChi2Heldout, 0.05)
		})
	}
}
