package plan

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// calibrated is a sequence of some calibrations and all-off frames; reading takes 4 s.
func calibrated(c sequence.Calibration, allOff int) *sequence.Sequence {
	p := &instrument.Profile{}
	p.Detector.ReadS, p.Grid.StepNM, p.Spectrograph.LSFFWHMPx = 4, 0.5, 3
	s := &sequence.Sequence{V: 127, K: 64, L: 32, Profile: p, Target: &sequence.Target{Calibration: c}}
	for range allOff {
		s.Steps = append(s.Steps, sequence.Step{Kind: sequence.AllOff})
	}
	return s
}

func sizesOf(s *sequence.Sequence, m forecast.Measure) map[sequence.Kind]CalibrationSize {
	m.Name, m.Voxels = "knot", max(m.Voxels, 1)
	list := calibrationSizes(s, &forecast.Result{Wanted: []forecast.Measure{m}, Saturation: forecast.Saturation{Limit: 50000}})
	kinds := map[sequence.Kind]CalibrationSize{}
	for _, c := range list {
		kinds[c.Kind] = c
	}
	return kinds
}

// Noise 5 % larger is a variance of 1.1025: 0.1025 may be added. By hand:
//
//   - 8 all-off frames give 1/5 of the variance, so they add 0.25 of the rest; one adds 2, and
//     2/N <= 0.1025 from N = 20 (19.5) on. Noise is larger by sqrt(1.25) - 1 = 11.8 % now.
//   - 4 bias and 6 dark frames give 0.1 and 0.3 of the variance, 1/6 and 1/2 of the rest; one
//     of each adds 2/3 and 3. They take 4 s and 64 s: sqrt(2/3/4) = 0.4082, sqrt(3/64) = 0.2165,
//     sqrt(2/3*4) + sqrt(3*64) = 1.633 + 13.856 = 15.489; over 0.1025 that is 151.1, so
//     61.7 bias and 32.7 dark frames: 62 and 33. They add 2/3/62 + 3/33 = 0.1017 indeed.
func TestCalibrationSizesByHand(t *testing.T) {
	off := sizesOf(calibrated(sequence.Calibration{}, 8), forecast.Measure{SNR: 10, Sigma: 1, Levels: forecast.Levels{AllOff: 0.2}})
	require.Equal(t, 20, off[sequence.AllOff].Needed)
	require.False(t, off[sequence.AllOff].Enough)
	require.InDelta(t, 0.11803, off[sequence.AllOff].Adds, 1e-5)
	require.Equal(t, "take 12 more: 8 add 11.8 % to the noise of knot, more than 5 %", off[sequence.AllOff].Verdict)
	require.True(t, off[sequence.Bias].Enough, "all-off frames give the level")

	c := sequence.Calibration{Bias: sequence.BiasFrames{Count: 4}, Dark: sequence.DarkFrames{Count: 6, DwellSeconds: 60}}
	m := forecast.Measure{SNR: 10, Sigma: 1, Levels: forecast.Levels{Bias: 0.1, Dark: 0.3}}
	level := sizesOf(calibrated(c, 0), m)
	require.Equal(t, 62, level[sequence.Bias].Needed)
	require.Equal(t, 33, level[sequence.Dark].Needed)

	// A tenth of that is 0.04 of the variance, 0.0417 of the rest: enough, in any proportion.
	m.Levels = forecast.Levels{Bias: 0.01, Dark: 0.03}
	level = sizesOf(calibrated(c, 0), m)
	require.True(t, level[sequence.Bias].Enough)
	require.True(t, level[sequence.Dark].Enough)
	require.LessOrEqual(t, level[sequence.Bias].Needed, 4)
}

// Lamps, by hand, where a pixel is full at 50000 e:
//
//   - a coded cycle of k = 64 gives 64 x 25000 = 1.6e6 e a pixel. Errors of 1 % would be 40
//     sigma: R = (4000)^2 = 1.6e7 in units of the variance, and R/E = 10 with one cycle: 10/N
//     <= 0.1025 from N = 98 (97.6) on.
//   - a line of FWHM 3 px with 25000 e at its top holds 25000 x 1.0645 x 3 = 79834 e in a
//     row. A wanted line of S/N 400 over 40 voxels in 4 wavelengths (2 nm of 0.5) is 10 places,
//     half of them with an arc of every second element: 5 x 79834 = 399170 e. 400^2/399170 =
//     0.4008 with one exposure, 0.4008/N <= 0.1025 from N = 4 (3.9) on.
func TestLampSizesByHand(t *testing.T) {
	c := sequence.Calibration{Flat: sequence.FlatFrames{Count: 1, CodedCycles: 1}, Arc: sequence.ArcFrames{Count: 1, Every: 2}}
	kinds := sizesOf(calibrated(c, 0), forecast.Measure{SNR: 400, Sigma: 2, ResponseSigma: 80, Line: true, FromNM: 500, ToNM: 502, Voxels: 40})
	require.Equal(t, 98, kinds[sequence.Flat].Needed)
	require.InDelta(t, 2.3166, kinds[sequence.Flat].Adds, 1e-4) // sqrt(11) - 1
	require.Equal(t, 4, kinds[sequence.Arc].Needed)
	require.InDelta(t, 0.1836, kinds[sequence.Arc].Adds, 1e-3) // sqrt(1.4008) - 1
	require.Contains(t, kinds[sequence.Arc].Verdict, "take 3 more of each element")

	band := sizesOf(calibrated(c, 0), forecast.Measure{SNR: 400, Sigma: 2, FromNM: 500, ToNM: 502, Voxels: 40})
	require.Equal(t, 1, band[sequence.Arc].Needed)
}

// Without anything that can be measured nothing is said.
func TestNoSizes(t *testing.T) {
	require.Nil(t, calibrationSizes(calibrated(sequence.Calibration{}, 0), nil))
	require.Empty(t, sizesOf(calibrated(sequence.Calibration{}, 0), forecast.Measure{SNR: 0.5, Sigma: 1}))
}

// What the forecast of a whole plan asks for is enough when it is planned, and one less is not:
// a wide aperture on faint light, and nothing but bias frames to give the level.
func TestNeededFramesAreEnough(t *testing.T) {
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	size := func(biases int) (CalibrationSize, []string) {
		target, err := sequence.ParseTarget("t.yaml", fmt.Appendf(nil, `name: faint
ra_deg: 123.3
dec_deg: 21.6
start_utc: 2031-02-11T04:00:00Z
code: {family: m-sequence, v: 31, dark: 8, element_mirrors: 2}
dwell_s: 2
calibration: {bias: {count: %d}}
forecast:
  sources: [{kind: gaussian, east_arcsec: 0, north_arcsec: 0, width_arcsec: 6, ab_mag: 17, at_nm: 550}]
  wanted: [{name: haze, source: 0, radius_arcsec: 6, band_nm: [540, 560]}]
`, biases))
		require.NoError(t, err)
		_, r, err := Build(context.Background(), target, profile)
		require.NoError(t, err)
		return r.Calibrations[0], r.Warnings
	}
	one, warned := size(1)
	require.Greater(t, one.Needed, 2, "%+v", one)
	require.Contains(t, warned, "calibration.bias.count: "+one.Verdict)
	less, _ := size(one.Needed - 1)
	require.False(t, less.Enough)
	require.Greater(t, less.Adds, MostAdded)
	enough, warned := size(one.Needed)
	require.True(t, enough.Enough)
	require.LessOrEqual(t, enough.Adds, MostAdded)
	require.Equal(t, one.Needed, enough.Needed)
	require.NotContains(t, fmt.Sprint(warned), "calibration.bias.count")
}
