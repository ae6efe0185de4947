package instrument

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib/physics"
)

const airKeys = `  height_m: 30
  pressure_hpa: 800
  temperature_c: -4
  water_hpa: 2.5
  extinction:
    - {wavelength_nm: 400, mag_per_airmass: 0.4}
    - {wavelength_nm: 600, mag_per_airmass: 0.2}
`

func withAir() string { return strings.Replace(plain, "  height_m: 30\n", airKeys, 1) }

// What the profile says of the air replaces the mean air at its height, key by key.
func TestSiteAtmosphere(t *testing.T) {
	bare, err := parsePlain(plain)
	require.NoError(t, err)
	require.Equal(t, physics.SiteAtmosphere(30), bare.Site.Atmosphere())
	require.Empty(t, bare.Site.Extinction.Curve())
	text, err := bare.YAML()
	require.NoError(t, err)
	for _, key := range []string{"pressure_hpa", "temperature_c", "water_hpa", "extinction"} {
		require.NotContains(t, string(text), key, "a profile without keeps its digest")
	}

	full, err := parsePlain(withAir())
	require.NoError(t, err)
	require.Equal(t, physics.Atmosphere{PressurePa: 80000, TemperatureC: -4, VapourPa: 250}, full.Site.Atmosphere())
	require.InDelta(t, 0.3, full.Site.Extinction.Curve().At(500), 1e-12)
	written, err := full.YAML()
	require.NoError(t, err)
	again, err := parsePlain(string(written))
	require.NoError(t, err)
	require.Equal(t, full.Site, again.Site)

	one, err := parsePlain(strings.Replace(plain, "  height_m: 30\n", "  height_m: 30\n  temperature_c: 0\n", 1))
	require.NoError(t, err)
	want := physics.SiteAtmosphere(30)
	want.TemperatureC = 0
	require.Equal(t, want, one.Site.Atmosphere())
}

func TestWrongSites(t *testing.T) {
	for _, c := range []struct{ old, replacement, want string }{
		{"pressure_hpa: 800", "pressure_hpa: 80", "p.yaml:12: site.pressure_hpa: 80 is outside 200 to 1100; give a number in this range"},
		{"temperature_c: -4", "temperature_c: 269", "p.yaml:13: site.temperature_c: 269 is outside -90 to 60; give a number in this range"},
		{"water_hpa: 2.5", "water_hpa: -1", "p.yaml:14: site.water_hpa: -1 is outside 0 to 200; give a number in this range"},
		{"pressure_hpa", "pressure", "p.yaml:12: site.pressure: unknown key; write pressure_hpa"},
		{"mag_per_airmass: 0.4", "mag_per_airmass: -0.4", "p.yaml:16: site.extinction[0].mag_per_airmass: -0.4 is outside 0 to 10; give a number in this range"},
		{"wavelength_nm: 400, mag_per", "wavelength_nm: 700, mag_per", "p.yaml:17: site.extinction[1].wavelength_nm: 600 does not lie above 700 before it; list the rows in ascending order"},
		{"    - {wavelength_nm: 600, mag_per_airmass: 0.2}\n", "", "p.yaml:15: site.extinction: the table has 1 rows; give at least 2"},
	} {
		require.Contains(t, withAir(), c.old)
		_, err := parsePlain(strings.Replace(withAir(), c.old, c.replacement, 1))
		require.EqualError(t, err, c.want)
	}
}

// The embedded curves cover their grids and take no less than molecules alone.
func TestEmbeddedSites(t *testing.T) {
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		curve, air := p.Site.Extinction.Curve(), p.Site.Atmosphere()
		for i := range p.Grid.Count {
			nm := p.Grid.WavelengthNM(float64(i))
			require.Greater(t, curve.At(nm), physics.RayleighExtinction(nm, air.PressurePa), "%s at %v nm", name, nm)
			require.Less(t, curve.At(nm), 1.0)
		}
		require.InEpsilon(t, physics.SiteAtmosphere(p.Site.HeightM).PressurePa, air.PressurePa, 0.02, name)
	}
}
