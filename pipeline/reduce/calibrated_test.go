package reduce_test

import (
	"context"
	"encoding/json"
	"math"
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
	checkFlatDepth(t, result.Run.Calibration.FlatDepth)

	// run.json and the report hold what was measured.
	text, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.RunFile))
	require.NoError(t, err)
	var run product.Run
	require.NoError(t, json.Unmarshal(text, &run))
	require.Equal(t, result.Run.Calibration.Arcs.Lines, run.Calibration.Arcs.Lines)
	page, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.ReportFile))
	require.NoError(t, err)
	for _, word := range []string{"Trace", "Flat field", "read noise", "How deep the flat field goes"} {
		require.Contains(t, string(page), word)
	}
}

// checkFlatDepth holds the corrected flat against all-on frames that no fit has seen:
// of the 1 % of the pixels and 2 % of slit and light path, 0.2 % is left at most, and
// less in cells of 8 x 8 pixels.
func checkFlatDepth(t *testing.T, depth []product.DepthAtSN) {
	t.Helper()
	require.GreaterOrEqual(t, len(depth), 4)
	for _, d := range depth {
		t.Logf("flat: cells of %d pixels: rms %.5f where photons allow %.5f, excess %.5f +- %.5f", d.Side, d.RMS, 1/d.SN, d.Excess, d.ExcessError)
		require.Less(t, d.Excess, 0.002+5*d.ExcessError)
		if d.Side == 8 {
			require.Less(t, d.Excess, 0.001+5*d.ExcessError)
		}
	}
}

// checkGeometry holds what run.json says against truth/geometry.yaml.
func checkGeometry(t *testing.T, night *trial.Night, c *product.Calibration) {
	t.Helper()
	truth := readGeometry(t, filepath.Join(night.Frames(trial.Noisy), rehearse.TruthFolder, rehearse.GeometryFile))
	p := night.Seq.Profile
	s := p.Spectrograph
	require.InDelta(t, truth.DispersionPxPerNM[0]/s.DispersionPxPerNM[0], c.Arcs.DispersionRatio, 1e-3)
	require.InDelta(t, truth.TraceTilt, c.Trace.Tilt, 2e-4)
	require.InDelta(t, 0, c.Trace.OffsetPx.Value, 0.02)
	require.InDelta(t, 0.01, c.Flat.PixelRMS, 0.003) // what rehearse draws

	// Section 3 of the design, with the geometry of DISPERSION's cards and the true one.
	got := geometryOf(t, night.CubePath(trial.Noisy))
	xc, yc, xe, jc, lc := got[0], got[1], got[2], got[3], got[4]
	n := night.Seq.N()
	worst := 0.0
	for j := range n {
		for y := 10; y < p.Detector.Rows-10; y++ {
			square := 0.0
			for i := range p.Grid.Count {
				l, q := p.Grid.WavelengthNM(float64(i))-lc, float64(y)-yc
				x := xc + xe*(float64(j)-jc) + l*(got[5]+l*(got[6]+l*got[7])) + q*(got[8]+q*got[9])
				l, q = p.Grid.WavelengthNM(float64(i))-truth.CenterNM, float64(y)-truth.YCenterPx
				d := truth.DispersionPxPerNM
				x -= truth.XCenterPx + truth.UStepPx*(float64(night.Seq.Target.OffsetU())+float64(night.Seq.ElementMirrors())*(float64(j)-float64(n-1)/2)) +
					l*(d[0]+l*(d[1]+l*d[2])) + q*(truth.SlitTilt+q*truth.SmilePerPx)
				square += x * x / float64(p.Grid.Count)
			}
			worst = max(worst, math.Sqrt(square))
		}
	}
	t.Logf("wavelengths: worst rms of an element and row %.4f px against the truth; arc lines %.4f px around the solution", worst, c.Arcs.RMSPx)
	require.Less(t, worst, 0.05)
}

func readGeometry(t *testing.T, path string) *rehearse.Geometry {
	t.Helper()
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	g, err := rehearse.ReadGeometry(path, text)
	require.NoError(t, err)
	return g
}
