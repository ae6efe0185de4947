package scene

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

const airScene = plainScene + `atmosphere:
  pressure_hpa: 780
  guide_nm: 620
  extinction:
    - {wavelength_nm: 400, mag_per_airmass: 0.4}
    - {wavelength_nm: 700, mag_per_airmass: 0.1}
  refraction: true
refstar:
  ab_mag: 12
  at_nm: 550
  temperature_k: 9000
  seeing_fwhm_arcsec: 0.9
`

func TestAtmosphereAndRefStarKeys(t *testing.T) {
	s, err := parsePlain(airScene)
	require.NoError(t, err)
	require.Equal(t, 620.0, *s.Atmosphere.GuideNM)
	require.True(t, s.Atmosphere.Refraction)
	require.Nil(t, s.Atmosphere.TemperatureC)
	require.Equal(t, 12.0, s.RefStar.ABMag)
	text, err := s.YAML()
	require.NoError(t, err)
	again, err := parsePlain(string(text))
	require.NoError(t, err)
	require.Equal(t, s, again)

	bare, err := parsePlain(plainScene)
	require.NoError(t, err)
	text, err = bare.YAML()
	require.NoError(t, err)
	require.NotContains(t, string(text), "atmosphere")
	require.NotContains(t, string(text), "refstar")

	for _, c := range []struct{ old, replacement, want string }{
		{"pressure_hpa: 780", "pressure_hpa: 78000", "scene.yaml:17: atmosphere.pressure_hpa: 78000 is outside 200 to 1100; give a number in this range"},
		{"guide_nm: 620", "guide_nm: 62", "scene.yaml:18: atmosphere.guide_nm: 62 is outside 200 to 100000; give a number in this range"},
		{"mag_per_airmass: 0.1", "mag_per_airmass: .nan", "scene.yaml:21: atmosphere.extinction[1].mag_per_airmass: .nan is no finite number; write a plain decimal number"},
		{"refraction: true", "refraction: 1", "scene.yaml:22: atmosphere.refraction: "},
		{"ab_mag: 12", "ab_mag: 99", "scene.yaml:24: refstar.ab_mag: 99 is outside -30 to 60; give a number in this range"},
		{"  at_nm: 550\n", "", "scene.yaml:23: refstar.at_nm: the key is missing; add it"},
		{"temperature_k: 9000", "spectrum_csv: s.csv", "scene.yaml:26: refstar.spectrum_csv: a scene read from memory can name no file; leave the key out"},
		{"seeing_fwhm_arcsec: 0.9", "seeing_fwhm_arcsec: 0", "scene.yaml:27: refstar.seeing_fwhm_arcsec: 0 is not above 0; give a positive number"},
	} {
		require.Contains(t, airScene, c.old)
		at := strings.LastIndex(airScene, c.old)
		_, err := parsePlain(airScene[:at] + c.replacement + airScene[at+len(c.old):])
		require.ErrorContains(t, err, c.want)
	}
}

// The star's spectrum is read from the file beside the scene and goes with the night.
func TestRefStarSpectrum(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "scene.yaml")
	require.NoError(t, os.WriteFile(path, []byte(strings.Replace(airScene, "temperature_k: 9000", "spectrum_csv: star.csv", 1)), 0o666))
	_, err := Load(path)
	require.ErrorContains(t, err, "scene.yaml:26: refstar.spectrum_csv: there is no file star.csv")
	require.NoError(t, os.WriteFile(filepath.Join(dir, "star.csv"), []byte("wavelength_nm,relative_flux\n500,1\n600,2\n"), 0o666))
	s, err := Load(path)
	require.NoError(t, err)
	require.Contains(t, s.Files(), "star.csv")
	require.NoError(t, s.Usable())
}
