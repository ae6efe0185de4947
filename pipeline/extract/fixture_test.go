package extract_test

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// The reduction's report imports extract: only tests from outside the package may
// make runs, and hand them in.
func init() { extract.TinyRun = tinyRun }

// tinyRun makes a night of the tiny field, with a slit and a trace that lean, and
// reduces it. It returns the run's folder.
func tinyRun(t *testing.T, family string, v, dark int) string {
	t.Helper()
	field, err := trial.Tiny()
	require.NoError(t, err)
	field.Profile.Spectrograph.SlitTilt, field.Profile.Spectrograph.TraceTilt = 0.05, 0.02
	field.SetCode(family, v, dark)
	night, err := field.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 5, NoTruth: true}))
	_, err = night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true})
	require.NoError(t, err)
	return night.Run(trial.Noisy)
}
