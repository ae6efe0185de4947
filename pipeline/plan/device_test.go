package plan_test

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
)

// The section of the demo: figures of mirrors of 13.7 um at f/4 (scaled from those for 13.68 um
// that package physics is held against).
func TestDevice(t *testing.T) {
	target, profile := demo(t)
	_, summary := build(t, target, profile)
	d := summary.Device
	require.InDelta(t, 7.125016, d.HalfAngleDeg, 1e-6)
	require.InDelta(t, 13.7, d.AcrossUM, 1e-12)
	require.InDelta(t, 9.673221*13.7/13.68, d.TiltPeriodUM, 1e-6)
	require.InDelta(t, 27.4, d.ElementUM, 1e-12)
	require.Len(t, d.Peaks, 3)
	for i, nm := range []float64{655.742, 562.065, 491.807} {
		require.InDelta(t, nm*13.7/13.68, d.Peaks[i].WavelengthNM, 2e-3)
		require.Equal(t, 6+i, d.Peaks[i].Order)
		require.Greater(t, d.Peaks[i].Ripple, 0.05)
	}
	require.Equal(t, 3, d.PeakCount)
	for i, at := range d.At {
		require.InDelta(t, 2*1.219669891*4*at.WavelengthNM/1000, at.SpotUM, 1e-6)
		require.InDelta(t, 1/(64*at.Contrast), at.Pedestal, 1e-15)
		require.InDelta(t, profile.DMD.Contrast.At(at.WavelengthNM), at.Contrast, 1e-12)
		if i > 0 {
			require.Greater(t, at.WavelengthNM, d.At[i-1].WavelengthNM)
		}
		if near := math.Round(at.BlazeOrder); math.Abs(at.BlazeOrder-near) < 1e-6 {
			require.Greater(t, at.Taken, 0.95)
			require.Positive(t, at.Neighbour)
		}
	}
	require.Contains(t, summary.String(), "half-angle of the beam 7.13 degrees")
	require.Len(t, d.Warnings, 2)
	require.Contains(t, d.Warnings[0], "6 at 656.7 nm, 7 at 562.9 nm, 8 at 492.5 nm")
	require.Contains(t, d.Warnings[1], "coded flats")
	bytes, err := json.Marshal(summary)
	require.NoError(t, err)
	require.Contains(t, string(bytes), `"device":{"half_angle_deg":7.125`)
}

// Each warning comes where its cause does, and not without.
func TestDeviceWarnings(t *testing.T) {
	const first, narrow, neighbour, contrast, none = "first order", "narrower than the spot", "open neighbours", "below the 2000", "no order of the mirror grating"
	all := []string{first, narrow, neighbour, contrast, none}
	for _, c := range []struct {
		name   string
		change func(p *instrument.Profile)
		want   []string
	}{
		{"the demo", func(*instrument.Profile) {}, []string{neighbour}},
		{"small mirrors", func(p *instrument.Profile) { p.DMD.PitchUM = 2.02 }, []string{first, narrow, neighbour}},
		{"huge mirrors", func(p *instrument.Profile) { p.DMD.PitchUM = 1e9 }, nil},
		{"tiny mirrors", func(p *instrument.Profile) { p.DMD.PitchUM = 1e-3 }, []string{narrow, none}},
		{"leaky mirrors", func(p *instrument.Profile) {
			p.DMD.Contrast = instrument.Contrast{{WavelengthNM: 400, Ratio: 3000}, {WavelengthNM: 700, Ratio: 900}}
		}, []string{neighbour, contrast}},
		{"turned", func(p *instrument.Profile) { at := 12.; p.DMD.IncidenceDeg = &at }, []string{neighbour}},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := demo(t)
			c.change(profile)
			_, summary := build(t, target, profile)
			text := strings.Join(summary.Device.Warnings, "\n")
			for _, w := range all {
				require.Equal(t, contains(c.want, w), strings.Contains(text, w), "%s: %s", w, text)
			}
			_, err := json.Marshal(summary) // no figure is NaN
			require.NoError(t, err)
			require.Subset(t, summary.Warnings, summary.Device.Warnings)
		})
	}
	target, profile := demo(t)
	target.Calibration.Flat.CodedCycles = 0
	_, summary := build(t, target, profile)
	require.Contains(t, strings.Join(summary.Device.Warnings, "\n"), "plan a coded flat cycle")
	profile.DMD.Mounting = instrument.Diagonal
	d := deviceIn(t, profile)
	require.InDelta(t, 9.673221*13.7/13.68, d.AcrossUM, 1e-6)
	require.InDelta(t, d.AcrossUM, d.TiltPeriodUM, 1e-12)
}

func deviceIn(t *testing.T, profile *instrument.Profile) *plan.Device {
	t.Helper()
	target, _ := demo(t)
	_, summary := build(t, target, profile)
	return summary.Device
}

func contains(words []string, w string) bool {
	for _, x := range words {
		if x == w {
			return true
		}
	}
	return false
}
