package plan_test

import (
	"context"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// wide is a field of evenly lit sky, n elements of one mirror, on a detector that holds them.
func wide(t testing.TB, n int, skyMag float64) (*sequence.Target, *instrument.Profile) {
	t.Helper()
	target, profile := proposal(t)
	profile.DMD.Columns = n
	profile.Detector.Columns = 2048
	profile.Detector.Amplifiers = profile.Detector.Amplifiers[:1]
	a := &profile.Detector.Amplifiers[0]
	a.Data, a.Overscan = [4]int{1, 2048, 1, 192}, instrument.Overscan{2049, 2080, 1, 192}
	s := &profile.Spectrograph
	s.XCenterPx, s.UStepPx, s.TraceTilt, s.TraceCurvePerPx, s.SlitTilt, s.SmilePerPx = 1024, 1, 0, 0, 0, 0
	target.AllOffEvery = 0
	target.Calibration = sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}
	target.Code.ElementMirrors = 1
	east, north, radius, mag := 0., 0., 1.5, skyMag
	target.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: 1,
		// A line too faint to add noise, seen against the sky.
		Sources: []scene.Source{{Kind: scene.KindStar, Lines: []scene.Line{{WavelengthNM: 580, FluxWM2: 1e-21, FWHMKmS: 40}}}},
		Sky:     scene.Sky{ContinuumABArcsec2: &mag},
		Wanted:  []sequence.Wanted{{Name: "line", EastArcsec: &east, NorthArcsec: &north, RadiusArcsec: &radius, LineNM: ptr(580.)}},
		Aim:     sequence.AimFaintest, Limits: sequence.Limits{TotalSeconds: 30000},
	}
	return target, profile
}

func ptr[T any](x T) *T { return &x }

// On a sky whose light in an element has about a tenth of the variance of the detector's,
// the chooser takes the Singer code (820,91,10) for a field of 800 elements, and says that it
// is sparse.
func TestSparseCodeIsChosen(t *testing.T) {
	target, profile := wide(t, 800, 19.8)
	// No overhead: the codes' sizes differ by some hundred frames.
	profile.Detector.ReadS = 0
	start := time.Now()
	_, summary, err := plan.Build(context.Background(), target, profile)
	require.NoError(t, err)
	e, photons := summary.Forecast.Wanted[0].Electrons, summary.Forecast.Wanted[0].Variance
	t.Logf("%v; own light %.2f e, photons %.2f, detector %.2f\n%s", time.Since(start), e.Own, photons.Photons, photons.Detector, summary.Trade)
	row := chosen(t, summary.Trade)
	require.Equal(t, "singer", row.Candidate.Family)
	require.Equal(t, [3]int{820, 91, 10}, [3]int{row.Candidate.V, row.Candidate.K, row.Candidate.L})
	// An element's photons are a tenth of the detector's variance: 91 open ones 9.1 times it.
	require.InDelta(t, 9.1, photons.Photons/photons.Detector, 1)
	// 2.972 less the dark columns' part; dark current counts with the detector and adds some.
	require.InEpsilon(t, 2.972*800/820, row.OverSlit, 0.08)
	require.Contains(t, summary.Trade.Recommendation, "opens only 91 columns at once")
}

// Where the sky brightens, the slit scan takes over: from dark to bright the code's gain
// over it falls, from above 1 to below, and the choice changes where it crosses 1.
func TestCrossoverWithTheSlitScan(t *testing.T) {
	last := 1e9
	var codes, slits int
	for _, mag := range []float64{24, 21, 18, 15, 12} {
		target, profile := wide(t, 100, mag)
		target.Forecast.Limits.TotalSeconds = 6000
		_, summary := build(t, target, profile)
		row := chosen(t, summary.Trade)
		best := 0.
		for _, r := range summary.Trade.Rows {
			if !r.IsSlit() && r.Breaks == "" {
				best = max(best, r.OverSlit)
			}
		}
		t.Logf("sky %v: %s, best code %.3f of the slit scan", mag, trade.Name(row.Candidate), best)
		require.Less(t, best, last)
		require.Equal(t, best <= 1, row.IsSlit())
		last = best
		if row.IsSlit() {
			slits++
		} else {
			codes++
		}
	}
	require.Positive(t, codes)
	require.Positive(t, slits)
}

// Planning v = 1023 without masks takes less than 5 s: of processor time, which other
// programs on the machine do not lengthen, and which is more than the wall's.
func TestPlanOf1023(t *testing.T) {
	target, profile := wide(t, 895, 20)
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Cycles = "m-sequence", ptr(1023), ptr(128), 1
	target.DwellSeconds = 20
	before := processorSeconds(t)
	_, summary, err := plan.Build(context.Background(), target, profile)
	require.NoError(t, err)
	took := processorSeconds(t) - before
	t.Logf("%.2f s", took)
	require.Less(t, took, 5.)
	require.NotNil(t, summary.Forecast)
}

func processorSeconds(t testing.TB) float64 {
	var u syscall.Rusage
	require.NoError(t, syscall.Getrusage(syscall.RUSAGE_SELF, &u))
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
