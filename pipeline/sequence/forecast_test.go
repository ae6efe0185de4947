package sequence_test

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

const forecastKeys = `forecast:
  seeing_fwhm_arcsec: 1.3
  sources:
    - {kind: star, east_arcsec: 1, north_arcsec: 2, ab_mag: 17, at_nm: 550, temperature_k: 5000}
    - kind: gaussian
      east_arcsec: 0
      north_arcsec: -1
      width_arcsec: 2
      lines: [{wavelength_nm: 500.8, flux_w_m2: 1.0e-16}]
  sky: {continuum_ab_arcsec2: 21}
  wanted:
    - {name: star, source: 0, band_nm: [540, 560]}
    - {name: knot, east_arcsec: 0, north_arcsec: -1, radius_arcsec: 1.5, line_nm: 500.8}
  aim: knot
  throughput_rms: 0.01
  limits: {total_s: 7200, lost_frames: 2, cosmic_per_1000: 0.5, cycle_s: 3600, flexure_px_h: 0.2, seeing_change_per_h: 0.3, sky_change_per_h: 0.4}
`

func TestForecastKeys(t *testing.T) {
	target, err := sequence.ParseTarget("t.yaml", []byte(smallTarget+forecastKeys))
	require.NoError(t, err)
	f := target.Forecast
	require.Equal(t, 0, *f.Wanted[0].Source)
	require.Equal(t, []float64{540, 560}, f.Wanted[0].BandNM)
	require.Equal(t, 500.8, *f.Wanted[1].LineNM)
	require.Equal(t, sequence.Limits{TotalSeconds: 7200, LostFrames: 2, CosmicPer1000: 0.5, CycleSeconds: 3600, FlexurePxPerHour: 0.2, SeeingChangePerHour: 0.3, SkyChangePerHour: 0.4}, f.Limits)
	require.Equal(t, 1.3, target.Scene().SeeingFWHMArcsec)
	text, err := target.YAML()
	require.NoError(t, err)
	again, err := sequence.ParseTarget("t.yaml", text)
	require.NoError(t, err)
	require.Equal(t, target.Forecast, again.Forecast)

	bare, err := sequence.ParseTarget("t.yaml", []byte(smallTarget+"forecast: {}\n"))
	require.NoError(t, err)
	require.Equal(t, &sequence.Forecast{SeeingFWHMArcsec: sequence.DefaultSeeingArcsec, Aim: sequence.AimFaintest}, bare.Forecast)
	none, err := sequence.ParseTarget("t.yaml", []byte(smallTarget))
	require.NoError(t, err)
	require.Nil(t, none.Scene())
}

// Each rule, broken in turn: one sentence with the key path.
func TestForecastRefusals(t *testing.T) {
	for _, c := range []struct{ old, replacement, want string }{
		{"seeing_fwhm_arcsec: 1.3", "seeing_fwhm_arcsec: 0", "forecast.seeing_fwhm_arcsec: 0 is not above 0"},
		{"kind: star", "kind: comet", `forecast.sources[0].kind: "comet" is unknown`},
		{"continuum_ab_arcsec2: 21", "continuum_ab_arcsec2: 99", "forecast.sky.continuum_ab_arcsec2: 99 is outside"},
		{"temperature_k: 5000", "spectrum_csv: s.csv", "forecast.sources[0].spectrum_csv: a scene read from memory can name no file"},
		{"source: 0,", "source: 2,", "forecast.wanted[0].source: 2 is outside 0 to 1"},
		{"source: 0,", "source: 0, east_arcsec: 1,", "forecast.wanted[0].east_arcsec: the source has its own place; leave the key out"},
		{"source: 0, ", "", "forecast.wanted[0]: neither a source nor a place is given"},
		{"radius_arcsec: 1.5, ", "", "forecast.wanted[1].radius_arcsec: the key is missing; add it"},
		{"radius_arcsec: 1.5", "radius_arcsec: -1", "forecast.wanted[1].radius_arcsec: -1 is not above 0"},
		{"line_nm: 500.8", "line_nm: 5", "forecast.wanted[1].line_nm: 5 is outside"},
		{", line_nm: 500.8", "", "forecast.wanted[1]: neither a line nor a band is given"},
		{"line_nm: 500.8", "line_nm: 500.8, band_nm: [500, 501]", "forecast.wanted[1].band_nm: line_nm is given already"},
		{"[540, 560]", "[560, 540]", "forecast.wanted[0].band_nm: 560 does not lie below 540; exchange them"},
		{"[540, 560]", "[540]", "forecast.wanted[0]: neither a line nor a band is given"},
		{"name: knot", "name: star", `forecast.wanted[1].name: "star" is taken; give another`},
		{"name: knot", "name: faintest", `forecast.wanted[1].name: "faintest" is taken; give another`},
		{"aim: knot", "aim: nut", `forecast.aim: "nut" is unknown; write faintest, mean, star or knot`},
		{"throughput_rms: 0.01", "throughput_rms: 2", "forecast.throughput_rms: 2 is outside 0 to 1"},
		{"total_s: 7200", "total_s: -1", "forecast.limits.total_s: -1 is below 0"},
		{"lost_frames: 2", "lost_frames: -2", "forecast.limits.lost_frames: -2 is outside"},
		{"cosmic_per_1000: 0.5", "cosmic_per_1000: 5000", "forecast.limits.cosmic_per_1000: 5000 is outside"},
		{"flexure_px_h: 0.2", "flexure_px_h: -1", "forecast.limits.flexure_px_h: -1 is outside 0 to 1000"},
		{"seeing_change_per_h: 0.3", "seeing_change_per_h: -1", "forecast.limits.seeing_change_per_h: -1 is outside 0 to 1000"},
		{"sky_change_per_h: 0.4", "sky_change_per_h: 1e9", "forecast.limits.sky_change_per_h: 1e+09 is outside 0 to 1000"},
		{"cycle_s: 3600", "cycle: 3600", "forecast.limits.cycle: unknown key; write cycle_s"},
	} {
		require.Equal(t, 1, strings.Count(forecastKeys, c.old), c.old)
		_, err := sequence.ParseTarget("t.yaml", []byte(smallTarget+strings.Replace(forecastKeys, c.old, c.replacement, 1)))
		require.ErrorContains(t, err, c.want)
	}
}

// The spectra that a forecast names go with the sequence.
func TestForecastSpectra(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "target.yaml")
	text := smallTarget + strings.Replace(forecastKeys, "temperature_k: 5000", "spectrum_csv: s.csv", 1)
	require.NoError(t, os.WriteFile(path, []byte(text), 0o666))
	_, err := sequence.LoadTarget(path)
	require.ErrorContains(t, err, "forecast.sources[0].spectrum_csv: there is no file s.csv")
	require.NoError(t, os.WriteFile(filepath.Join(dir, "s.csv"), []byte("wavelength_nm,relative_flux\n500,1\n600,3\n"), 0o666))
	target, err := sequence.LoadTarget(path)
	require.NoError(t, err)
	_, profile := small(t, instrument.Diagonal)
	folder := write(t, build(t, target, profile))
	s, err := sequence.Read(context.Background(), folder)
	require.NoError(t, err)
	require.InEpsilon(t, 2.0, s.Target.Scene().Spectrum("s.csv").At(550), 1e-12)
	require.NoError(t, s.Target.Scene().Usable())
}
