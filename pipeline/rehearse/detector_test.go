package rehearse

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
)

// Read noise, gain, bias and dark current recovered from the frames by numpy and
// astropy, within 1 % or 5 standard errors, whichever is more.
func TestCrosscheckDetector(t *testing.T) {
	for _, name := range testProfiles() {
		p := cutProfile(t, name, 400, 112, 320)
		p.Detector.DarkEPerS = 2
		target := smallTarget(p)
		target.Calibration.Bias.Count, target.Calibration.Dark.Count, target.Calibration.Flat.Count = 8, 4, 16
		target.Calibration.Arc.Count, target.Calibration.Flat.CodedCycles, target.AllOffEvery = 0, 0, 0
		dir := t.TempDir()
		seq, _, err := plan.Build(t.Context(), target, p)
		require.NoError(t, err)
		require.NoError(t, seq.Write(t.Context(), filepath.Join(dir, "seq")))
		night, _ := rehearsed(t, seq, smallScene(p.Spectrograph.CenterNM), Options{Seed: 11, Perfect: true, NoTruth: true})
		amplifiers := writeAmplifiers(t, p, dir)
		var got []struct {
			ReadNoiseE  float64 `json:"read_noise_e"`
			Gain        float64 `json:"gain"`
			BiasADU     float64 `json:"bias_adu"`
			DarkEPerS   float64 `json:"dark_e_per_s"`
			ReadSamples float64 `json:"read_samples"`
			GainSamples float64 `json:"gain_samples"`
			DarkSamples float64 `json:"dark_samples"`
			FlatADU     float64 `json:"flat_adu"`
		}
		out := outside.Python(t, "rehearse_detector.py", night, filepath.Join(dir, "seq", "sequence.fits"), amplifiers)
		require.NoError(t, json.Unmarshal([]byte(out), &got))
		for i, a := range p.Detector.Amplifiers {
			g := got[i]
			t.Logf("%s amplifier %d: read noise %.4f e (%v), gain %.4f (%v), bias %.2f (%v), dark %.4f e/s (2); flats of %.0f ADU", name, i, g.ReadNoiseE, a.ReadNoiseE, g.Gain, a.GainEPerADU, g.BiasADU, a.BiasADU, g.DarkEPerS, g.FlatADU)
			within1 := func(want, got, standardError float64, what string) {
				require.InDelta(t, want, got, math.Max(0.01*want, 5*standardError), "%s amplifier %d: %s", name, i, what)
			}
			gainError := a.GainEPerADU * math.Sqrt(2/g.GainSamples)
			within1(a.GainEPerADU, g.Gain, gainError, "gain")
			within1(a.ReadNoiseE, g.ReadNoiseE, a.ReadNoiseE*math.Hypot(math.Sqrt(1/g.ReadSamples), gainError/a.GainEPerADU), "read noise")
			within1(a.BiasADU, g.BiasADU, 0, "bias")
			perFrame := math.Sqrt(2*60+a.ReadNoiseE*a.ReadNoiseE) / 60
			within1(2, g.DarkEPerS, math.Hypot(perFrame/math.Sqrt(g.DarkSamples), 2*gainError/a.GainEPerADU), "dark")
		}
	}
}

func writeAmplifiers(t *testing.T, p *instrument.Profile, dir string) string {
	type amplifier struct {
		Data     instrument.Section `json:"data"`
		Overscan []int              `json:"overscan"`
	}
	var list []amplifier
	for _, a := range p.Detector.Amplifiers {
		list = append(list, amplifier{a.Data, a.Overscan})
	}
	text, err := json.Marshal(list)
	require.NoError(t, err)
	path := filepath.Join(dir, "amplifiers.json")
	require.NoError(t, os.WriteFile(path, text, 0o666))
	return path
}

// A dead column shows bias and read noise only, and there is at most one in 640
// columns; overscan sees no light; a raw row outside all sections reads 0.
func TestDeadColumns(t *testing.T) {
	d := instrument.Detector{Columns: 640, Rows: 4, SaturationADU: 60000, DarkEPerS: 3, Amplifiers: []instrument.Amplifier{
		{Data: instrument.Section{1, 640, 1, 4}, GainEPerADU: 2, ReadNoiseE: 3, BiasADU: 1000},
	}}
	places := map[int]bool{}
	for seed := range uint64(40) {
		n := newDetector(d, seed, true, true)
		count := 0
		for x, dead := range n.dead {
			if dead {
				count++
				places[x] = true
				r := n.newReader()
				raw, mean := make([]float64, 640), make([]float64, 640)
				for i := range mean {
					mean[i] = 500
				}
				r.read(raw, 0, mean, &reading{exptime: 10, pattern: make([]float64, 640), before: make([]float64, 640)})
				require.Equal(t, 1000.0, raw[x])
				require.Equal(t, 1000+530/2.0, raw[(x+1)%640])
			}
		}
		require.Equal(t, 1, count)
	}
	require.Greater(t, len(places), 30)
	d.Columns = 639
	require.NotContains(t, newDetector(d, 1, true, true).dead, true)
}

// Pixels stop at the full well, 2 % above the level called saturated, and the
// converter stops at 65535.
func TestFullWell(t *testing.T) {
	d := instrument.Detector{Columns: 2, Rows: 1, SaturationADU: 30000, Amplifiers: []instrument.Amplifier{
		{Data: instrument.Section{1, 2, 1, 1}, GainEPerADU: 2, ReadNoiseE: 3, BiasADU: 1000},
	}}
	n := newDetector(d, 1, true, true)
	r, raw := n.newReader(), make([]float64, 2)
	r.read(raw, 0, []float64{57998, 1e9}, &reading{pattern: []float64{0, 0}, before: make([]float64, 2)})
	require.Equal(t, []float64{29999, 1000 + 1.02*29000}, raw)
	require.Equal(t, 1, r.full)

	s := &stepReader{r: &rehearsal{}, raw: []float64{-3, 0.49, 0.5, 65534.6, 1e9}}
	dst := make([]byte, 10)
	s.store(dst)
	require.Equal(t, []byte{0, 0, 0, 0, 1, 0, 255, 255, 255, 255}, dst)
}

// The profile's linearity polynomial undoes what the detector does.
func TestMeasuredInvertsLinearity(t *testing.T) {
	d := &detector{perfect: true}
	d.Linearity = []float64{2e-7, 3e-12}
	for _, linear := range []float64{0, 10, 1000, 30000, 60000} {
		m := d.measured(linear)
		require.InDelta(t, linear, m*(1+2e-7*m+3e-12*m*m), 1e-6)
	}
	require.Less(t, d.measured(60000), 60000.0)
}

// Rows of detectors whose amplifiers lie above one another map as the profile
// says, with overscan in between.
func TestStackedAmplifiers(t *testing.T) {
	d := instrument.Detector{Columns: 4, Rows: 6, SaturationADU: 60000, Amplifiers: []instrument.Amplifier{
		{Data: instrument.Section{1, 4, 1, 3}, Overscan: instrument.Overscan{5, 6, 1, 3}, GainEPerADU: 1, ReadNoiseE: 1, BiasADU: 100},
		{Data: instrument.Section{1, 4, 6, 8}, Overscan: instrument.Overscan{5, 6, 6, 8}, GainEPerADU: 1, ReadNoiseE: 1, BiasADU: 200},
	}}
	n := newDetector(d, 1, true, true)
	active := []int{0, 1, 2, -1, -1, 3, 4, 5}
	for raw, want := range active {
		require.Equal(t, want, n.rows[raw].active, raw)
	}
	r, out := n.newReader(), make([]float64, n.rawColumns)
	r.read(out, 6, []float64{1, 2, 3, 4}, &reading{pattern: make([]float64, 4), before: make([]float64, 4)})
	require.Equal(t, []float64{201, 202, 203, 204, 200, 200}, out)
	r.read(out, 3, nil, &reading{})
	require.Equal(t, make([]float64, 6), out)
}
