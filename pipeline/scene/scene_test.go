package scene

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/configs"
)

const plainScene = `seeing_fwhm_arcsec: 1.1
sources:
  - {kind: star, east_arcsec: 1, north_arcsec: 2, ab_mag: 17, at_nm: 550, temperature_k: 5000}
  - kind: ring
    east_arcsec: 0
    north_arcsec: -1
    radius_arcsec: 5
    width_arcsec: 2
    lines:
      - {wavelength_nm: 500.8, flux_w_m2: 1.0e-16, fwhm_km_s: 30}
    velocity: {systemic_km_s: 20, gradient_km_s_arcsec: 3, pa_deg: 45}
sky:
  continuum_ab_arcsec2: 21
  lines:
    - {wavelength_nm: 557.9, flux_w_m2_arcsec2: 1.0e-18}
`

func parsePlain(text string) (*Scene, error) { return Parse("scene.yaml", []byte(text), nil) }

func TestEmbeddedScenes(t *testing.T) {
	require.Equal(t, []string{"demo-infrared", "demo-visible", "demo"}, Names())
	for _, name := range Names() {
		s, err := Load(name)
		require.NoError(t, err)
		text, err := s.YAML()
		require.NoError(t, err)
		again, err := Parse(name, text, nil)
		require.NoError(t, err)
		require.Equal(t, s, again)
		kinds := map[string]int{}
		for _, source := range s.Sources {
			kinds[source.Kind]++
		}
		if name == "demo-visible" {
			require.Equal(t, map[string]int{KindStar: 3}, kinds, name)
			require.NotNil(t, s.RefStar)
			require.True(t, s.Atmosphere.Refraction)
			continue
		}
		require.Equal(t, map[string]int{KindRing: 1, KindStar: 5, KindGalaxy: 1}, kinds, name)
	}
}

// Each rule of a scene, broken in turn: one sentence with line and key path.
func TestSceneRefusals(t *testing.T) {
	_, err := parsePlain(plainScene)
	require.NoError(t, err)
	for _, c := range []struct{ old, replacement, want string }{
		{"seeing_fwhm_arcsec: 1.1", "seeing_fwhm_arcsec: 0", "scene.yaml:1: seeing_fwhm_arcsec: 0 is not above 0; give a positive number"},
		{"seeing_fwhm_arcsec: 1.1", "seeing: 1.1", "scene.yaml:1: seeing: unknown key; write seeing_fwhm_arcsec"},
		{"kind: star", "kind: comet", `scene.yaml:3: sources[0].kind: "comet" is unknown; write star, gaussian, ring or galaxy`},
		{"east_arcsec: 1,", "east_arcsec: .nan,", "scene.yaml:3: sources[0].east_arcsec: .nan is no finite number; write a plain decimal number"},
		{"ab_mag: 17, at_nm: 550", "ab_mag: 17", "scene.yaml:3: sources[0].at_nm: 0 is outside 100 to 100000; give a number in this range"},
		{"ab_mag: 17, at_nm: 550, temperature_k: 5000", "temperature_k: 5000", "scene.yaml:3: sources[0].temperature_k: there is no ab_mag to scale it by; give ab_mag or leave it out"},
		{"ab_mag: 17, at_nm: 550, temperature_k: 5000", "at_nm: 5", "scene.yaml:3: sources[0].at_nm: there is no ab_mag that it belongs to; give ab_mag or leave it out"},
		{", ab_mag: 17, at_nm: 550, temperature_k: 5000", "", "scene.yaml:3: sources[0]: the source has neither a continuum nor lines; give ab_mag or lines"},
		{"temperature_k: 5000", "temperature_k: 5", "scene.yaml:3: sources[0].temperature_k: 5 is outside 100 to 1e+07; give a number in this range"},
		{"temperature_k: 5000", "temperature_k: 5000, spectrum_csv: s.csv", "scene.yaml:3: sources[0].spectrum_csv: temperature_k gives the continuum already; leave one of the two out"},
		{"temperature_k: 5000", "spectrum_csv: s.csv", "scene.yaml:3: sources[0].spectrum_csv: a scene read from memory can name no file; leave the key out"},
		{"temperature_k: 5000", "temperature_k: 5000, radius_arcsec: 3", "scene.yaml:3: sources[0].radius_arcsec: a star has no such size; leave the key out"},
		{"    radius_arcsec: 5\n", "", "scene.yaml:4: sources[1].radius_arcsec: 0 is not above 0; give a positive number"},
		{"width_arcsec: 2", "width_arcsec: -2", "scene.yaml:8: sources[1].width_arcsec: -2 is not above 0; give a positive number"},
		{"flux_w_m2: 1.0e-16", "flux_w_m2: -1", "scene.yaml:10: sources[1].lines[0].flux_w_m2: -1 is outside 0 to 1000; give a number in this range"},
		{"wavelength_nm: 500.8", "wavelength_nm: 5", "scene.yaml:10: sources[1].lines[0].wavelength_nm: 5 is outside 100 to 100000; give a number in this range"},
		{"fwhm_km_s: 30", "fwhm_km_s: -3", "scene.yaml:10: sources[1].lines[0].fwhm_km_s: -3 is outside 0 to 100000; give a number in this range"},
		{"pa_deg: 45", "pa_deg: 450", "scene.yaml:11: sources[1].velocity.pa_deg: 450 is outside -360 to 360; give a number in this range"},
		{"continuum_ab_arcsec2: 21", "continuum_ab_arcsec2: 99", "scene.yaml:13: sky.continuum_ab_arcsec2: 99 is outside -30 to 60; give a number in this range"},
		{"flux_w_m2_arcsec2: 1.0e-18", "flux_w_m2: 1.0e-18", "scene.yaml:15: sky.lines[0].flux_w_m2: unknown key; write flux_w_m2_arcsec2"},
	} {
		require.Equal(t, 1, strings.Count(plainScene, c.old), c.old)
		_, err := parsePlain(strings.Replace(plainScene, c.old, c.replacement, 1))
		require.EqualError(t, err, c.want)
	}
}

// A spectrum is read from the file beside the scene, scaled to the AB magnitude,
// and goes with the night.
func TestSpectrumCSV(t *testing.T) {
	dir := t.TempDir()
	text := strings.Replace(plainScene, "temperature_k: 5000", "spectrum_csv: s.csv", 1)
	path := filepath.Join(dir, "scene.yaml")
	require.NoError(t, os.WriteFile(path, []byte(text), 0o666))
	_, err := Load(path)
	require.ErrorContains(t, err, "scene.yaml:3: sources[0].spectrum_csv: there is no file s.csv")
	for data, want := range map[string]string{
		"":           "s.csv:1: the table has 0 rows; give at least 2",
		"a,b\n1,2\n": "s.csv:1: the first line is not wavelength_nm,relative_flux; write it",
		"wavelength_nm,relative_flux\n500,1\n400,2\n":   "s.csv:3: wavelength_nm 400 does not lie above the one before it; list the rows in ascending order",
		"wavelength_nm,relative_flux\n500,1\n600,-2\n":  `s.csv:3: relative_flux "-2" is no number from 0; give an energy per nm`,
		"wavelength_nm,relative_flux\n500,1\nred,2\n":   `s.csv:3: wavelength_nm "red" is no number from 100 to 100000; give vacuum nanometres`,
		"wavelength_nm,relative_flux\n500,1\n600,2,3\n": "s.csv:3: not CSV of two fields (wrong number of fields); write wavelength_nm,relative_flux",
		"wavelength_nm,relative_flux\n600,1\n700,2\n":   path + ":3: sources[0].at_nm: s.csv has no light at 550 nm to scale by ab_mag; give a wavelength where it has",
		"wavelength_nm,relative_flux\n500,NaN\n700,2\n": `s.csv:2: relative_flux "NaN" is no number from 0; give an energy per nm`,
		"wavelength_nm,relative_flux\n500,1\n\"700,2\n": "",
	} {
		require.NoError(t, os.WriteFile(filepath.Join(dir, "s.csv"), []byte(data), 0o666))
		_, err := Load(path)
		require.Error(t, err, data)
		if want != "" {
			require.EqualError(t, err, want)
		}
	}
	require.NoError(t, os.WriteFile(filepath.Join(dir, "s.csv"), []byte("wavelength_nm,relative_flux\n500,1\n600,3\n"), 0o666))
	s, err := Load(path)
	require.NoError(t, err)
	table := s.Spectrum("s.csv")
	require.InEpsilon(t, 2.0, table.At(550), 1e-12)
	require.Zero(t, table.At(601))
	require.Zero(t, table.At(499))

	copied := *s
	copied.spectra = nil
	require.EqualError(t, copied.Usable(), "sources[0].spectrum_csv: s.csv was not read; load the scene from its file")
	require.Error(t, s.Validate())
}

func FuzzScene(f *testing.F) {
	f.Add([]byte(plainScene))
	for _, name := range configs.Names(configs.Scenes) {
		data, err := configs.Read(configs.Scenes, name)
		require.NoError(f, err)
		f.Add(data)
	}
	f.Add([]byte("seeing_fwhm_arcsec: 1\n"))
	f.Add([]byte("seeing_fwhm_arcsec: 1\nsources: [{kind: star, east_arcsec: 0, north_arcsec: 0, ab_mag: 1, at_nm: 500, spectrum_csv: s.csv}]\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		beside := func(string) ([]byte, error) { return []byte("wavelength_nm,relative_flux\n100,1\n900,2\n"), nil }
		s, err := Parse("scene.yaml", data, beside)
		if err != nil {
			require.Nil(t, s)
			return
		}
		text, err := s.YAML()
		require.NoError(t, err)
		again, err := Parse("scene.yaml", text, beside)
		require.NoError(t, err)
		require.Equal(t, s, again)
		require.NoError(t, s.Usable())
	})
}

func FuzzSpectrum(f *testing.F) {
	f.Add([]byte("wavelength_nm,relative_flux\n500,1\n600,3\n"))
	f.Add([]byte("wavelength_nm,relative_flux\n500,1\n"))
	f.Add([]byte("a,b\n\"1,2\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := parseSpectrum("s.csv", data)
		if err != nil {
			return
		}
		require.GreaterOrEqual(t, len(s.NM), 2)
		for i := range s.NM {
			require.InEpsilon(t, 1+s.RelativeFlux[i], 1+s.At(s.NM[i]), 1e-9)
		}
	})
}
