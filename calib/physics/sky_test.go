package physics

import (
	"encoding/json"
	"fmt"
	"math"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// Kasten & Young 1989 with constants seen in ten public sources, computed with
// numpy; 0, 80 and 89.9 degrees also stand in a solar library's test table.
func TestAirmassTable(t *testing.T) {
	for z, want := range map[float64]float64{0: 0.999712, 30: 1.153992, 45: 1.412595, 60: 1.994293, 70: 2.903147,
		75: 3.812912, 80: 5.586036, 85: 10.305791, 89.9: 36.466786, 90: 37.919608} {
		require.InDelta(t, want, Airmass(z), 1e-6*want, "z = %g", z)
	}
	for _, z := range []float64{-0.1, 90.1, math.NaN()} {
		require.True(t, math.IsNaN(Airmass(z)))
	}
}

// Meeus, Astronomical Algorithms, examples 12.a and 12.b: mean sidereal time at
// Greenwich, 1987 April 10: 13h10m46.3668s at 0h, 8h34m57.0896s at 19h21m.
// (From memory of the book's text.)
func TestSiderealTimeMeeus(t *testing.T) {
	hours := func(h, m, s float64) float64 { return 15 * (h + m/60 + s/3600) }
	require.InDelta(t, hours(13, 10, 46.3668), SiderealTime(time.Date(1987, 4, 10, 0, 0, 0, 0, time.UTC), 0), 1e-6)
	require.InDelta(t, hours(8, 34, 57.0896), SiderealTime(time.Date(1987, 4, 10, 19, 21, 0, 0, time.UTC), 0), 1e-6)
	require.InDelta(t, hours(13, 10, 46.3668)-70, SiderealTime(time.Date(1987, 4, 10, 0, 0, 0, 0, time.UTC), -70), 1e-6)
}

// Meeus, example 21.b: theta Persei, J2000 with proper motion 41.054063, 49.227750,
// precessed to 2028 November 13.19 TD is 41.547214, 49.348483. (From memory.)
func TestPrecessMeeus(t *testing.T) {
	ra, dec := precess(41.054063, 49.227750, time.Date(2028, 11, 13, 4, 33, 36, 0, time.UTC))
	require.InDelta(t, 41.547214, ra, 1e-5)
	require.InDelta(t, 49.348483, dec, 1e-5)
}

type skyCase struct {
	UTC                              string
	RA, Dec, Latitude, LongitudeEast float64
	Zenith, Apparent                 float64 // astropy's answers
}

// astropy's AltAz (full precession, nutation, aberration, polar motion left at 0) over
// times of 1995 to 2040 and places all over; the requirement is 0.1 degrees.
func TestCrosscheckZenithDistance(t *testing.T) {
	var cases []skyCase
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_sky.py")), &cases))
	require.Len(t, cases, 200)
	worst, worstApparent := 0.0, 0.0
	for _, c := range cases {
		utc, err := time.Parse("2006-01-02T15:04:05", c.UTC)
		require.NoError(t, err)
		z := ZenithDistance(c.RA, c.Dec, utc, c.Latitude, c.LongitudeEast)
		worst = max(worst, math.Abs(z-c.Zenith))
		if c.Zenith < 85 {
			worstApparent = max(worstApparent, math.Abs(ApparentZenithDistance(c.Zenith)-c.Apparent))
			require.InEpsilon(t, Airmass(c.Apparent), TargetAirmass(c.RA, c.Dec, utc, c.Latitude, c.LongitudeEast), 0.01)
		}
	}
	t.Logf("zenith distance off by %.4f deg at most, refraction above 5 deg of altitude by %.4f deg", worst, worstApparent)
	require.Less(t, worst, 0.02)           // as the docs say
	require.Less(t, worstApparent, 0.0083) // 0.5 arcmin
}

// A target on the meridian: z = |latitude - declination| of the date; at the zenith
// itself the answer keeps its accuracy.
func TestZenithDistanceMeridian(t *testing.T) {
	utc := time.Date(2000, 1, 1, 12, 0, 0, 0, time.UTC)
	lst := SiderealTime(utc, 20)
	require.InDelta(t, 50, ZenithDistance(lst, -20, utc, 30, 20), 1e-9)
	require.InDelta(t, 0, ZenithDistance(lst, 30, utc, 30, 20), 1e-9)
	require.InDelta(t, 120, ZenithDistance(lst+180, 30, utc, 30, 20), 1e-9) // lower culmination: 180 - 60
	require.True(t, math.IsNaN(TargetAirmass(lst+180, 30, utc, 30, 20)))
}

// Saemundsson's formula: 28.98' at the true horizon for these conditions by hand,
// 1.02/tan(10.3/5.11 deg); about 1' at 45 degrees (common practice, 58.3" at 0 C).
func TestApparentZenithDistance(t *testing.T) {
	require.InDelta(t, 90-28.98/60, ApparentZenithDistance(90), 1e-4)
	require.InDelta(t, 45-1/60.0, ApparentZenithDistance(45), 0.001)
	require.Equal(t, 95.0, ApparentZenithDistance(95))
	for z := 0.0; z <= 90; z += 0.25 {
		require.LessOrEqual(t, ApparentZenithDistance(z), z, fmt.Sprint(z))
		require.GreaterOrEqual(t, ApparentZenithDistance(z), 0.0)
	}
}
