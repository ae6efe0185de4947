package reduce_test

import (
	"context"
	"encoding/json"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

// An imperfect night, calibrated by its own lamps: the pulls are normal, white light and
// a nebula's lines agree with the truth. The lines that stand alone are the first two
// (see trial.Field).
func TestCalibratedNight(t *testing.T) {
	f, err := trial.Lamps()
	require.NoError(t, err)
	night, result, err := f.Calibrated(context.Background(), t.TempDir(), 3)
	require.NoError(t, err)
	g := f.Profile.Grid
	findings, err := night.CalibratedFindings("lamps", []float64{g.WavelengthNM(0.1 * float64(g.Count)), g.WavelengthNM(0.25 * float64(g.Count))})
	require.NoError(t, err)
	hold(t, findings)
	require.GreaterOrEqual(t, result.Run.Quality.CoveredGoodFraction, 0.99)
	checkGeometry(t, night, result.Run.Calibration)

	// run.json and the report hold what was measured.
	text, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.RunFile))
	require.NoError(t, err)
	var run product.Run
	require.NoError(t, json.Unmarshal(text, &run))
	require.Equal(t, result.Run.Calibration.Arcs.Lines, run.Calibration.Arcs.Lines)
	page, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.ReportFile))
	require.NoError(t, err)
	for _, word := range []string{"Trace", "Flat field", "read noise"} {
		require.Contains(t, string(page), word)
	}
}

// checkGeometry holds what run.json says against truth/geometry.yaml.
func checkGeometry(t *testing.T, night *trial.Night, c *product.Calibration) {
	t.Helper()
	path := filepath.Join(night.Frames(trial.Noisy), rehearse.TruthFolder, rehearse.GeometryFile)
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	truth, err := rehearse.ReadGeometry(path, text)
	require.NoError(t, err)
	s := night.Seq.Profile.Spectrograph
	require.Less(t, c.Arcs.RMSPx, 0.05)
	require.Less(t, c.Arcs.WorstErrorPx, 0.05)
	require.InDelta(t, truth.DispersionPxPerNM[0]/s.DispersionPxPerNM[0], c.Arcs.DispersionRatio, 1e-3)
	require.InDelta(t, truth.TraceTilt, c.Trace.Tilt, 2e-4)
	require.InDelta(t, 0, c.Trace.OffsetPx.Value, 0.02)
	require.InDelta(t, 0.01, c.Flat.PixelRMS, 0.003) // what rehearse draws
}
