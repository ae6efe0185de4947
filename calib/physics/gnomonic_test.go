package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// wcslib 7.12 (fits_wcs.md, headers B and E): CRVAL 83.822, -5.391, 0.72 arcsec a pixel,
// and CRVAL 10, 89.9, 36 arcsec a pixel.
func TestGnomonicAgainstWCSLib(t *testing.T) {
	for _, c := range []struct{ ra0, dec0, east, north, ra, dec float64 }{
		{83.822, -5.391, 0.72 * 31.5, -0.72 * 23, 83.82832803829788, -5.395599967276224},
		{83.822, -5.391, -0.72 * 31.5, 0.72 * 24, 83.81567205967409, -5.386199967354666},
		{10, 89.9, -36 * 10, 36 * 20, 235.0000727221221, 89.85857975663703},
		{10, 89.9, 36 * 10, 36 * 30, 163.4349022807462, 89.77639640357403},
		{10, 89.9, 0, 0, 10, 89.9},
	} {
		ra, dec := FromGnomonic(c.east, c.north, c.ra0, c.dec0)
		require.InDelta(t, c.ra, ra, 1e-9)
		require.InDelta(t, c.dec, dec, 1e-9)
		east, north := Gnomonic(c.ra, c.dec, c.ra0, c.dec0)
		require.InDelta(t, c.east, east, 1e-8)
		require.InDelta(t, c.north, north, 1e-8)
	}
}

func TestGnomonicRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ra0, dec0 := rapid.Float64Range(0, 360).Draw(t, "ra0"), rapid.Float64Range(-90, 90).Draw(t, "dec0")
		x, y := rapid.Float64Range(-3600, 3600).Draw(t, "east"), rapid.Float64Range(-3600, 3600).Draw(t, "north")
		ra, dec := FromGnomonic(x, y, ra0, dec0)
		east, north := Gnomonic(ra, dec, ra0, dec0)
		require.InDelta(t, x, east, 1e-6)
		require.InDelta(t, y, north, 1e-6)
	})
	east, _ := Gnomonic(180, 0, 0, 0)
	require.True(t, math.IsNaN(east))
}

// A strip as wide as the FWHM, centred, has erf(sqrt(ln 2)) = 0.7610 of the light; one at
// the star's edge half of what is on one side; strips that tile the sky all of it.
func TestStripFraction(t *testing.T) {
	require.InDelta(t, 0.7609681, StripFraction(1.2, 1.2, 0), 1e-7)
	require.InDelta(t, 0.5, StripFraction(1, 100, 50), 1e-12)
	sum := 0.0
	for i := -20; i <= 20; i++ {
		sum += StripFraction(1.3, 0.7, 0.2+0.7*float64(i))
	}
	require.InDelta(t, 1, sum, 1e-12)
	require.InDelta(t, 1.0*math.Pow(2, 0.6), SeeingFWHM(1, 500, 500, 2), 1e-12)
	require.InDelta(t, 0.8706, SeeingFWHM(1, 500, 1000, 1), 1e-4) // 2^-0.2
}
