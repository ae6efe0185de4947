package physics

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// Sun and moon at 60 times from 1995 to 2045 from sites of both hemispheres, against astropy:
// the sun's altitude within 0.02 degrees, the moon's within 0.6 (0.3 of the series and the
// changing distance's part of the parallax), its lit part within 0.01.
func TestCrosscheckSunAndMoon(t *testing.T) {
	var b strings.Builder
	var want []func([]float64)
	for i := range 60 {
		at := time.Date(1995, 1, 1, 0, 0, 0, 0, time.UTC).Add(time.Duration(i) * 7309 * time.Hour)
		latitude, longitude := -65+float64(i*37%131), -180+float64(i*71%360)
		fmt.Fprintf(&b, "%s %g %g\n", at.Format("2006-01-02T15:04:05"), latitude, longitude)
		want = append(want, func(v []float64) {
			where := fmt.Sprint(at, latitude, longitude)
			require.InDelta(t, v[0], SunAltitude(at, latitude, longitude), 0.02, where)
			m := MoonAt(at, latitude, longitude)
			require.InDelta(t, v[1], m.AltitudeDeg, 0.6, where)
			require.InDelta(t, v[2], m.Lit, 0.01, where)
			require.Less(t, Separation(v[3], v[4], m.RADeg, m.DecDeg), 0.6, where)
		})
	}
	file := filepath.Join(t.TempDir(), "times")
	require.NoError(t, os.WriteFile(file, []byte(b.String()), 0o600))
	lines := strings.Split(strings.TrimSpace(outside.Python(t, "calib_sunmoon.py", file)), "\n")
	require.Len(t, lines, len(want))
	for i, line := range lines {
		var v []float64
		for _, word := range strings.Fields(line) {
			x, err := strconv.ParseFloat(word, 64)
			require.NoError(t, err)
			v = append(v, x)
		}
		want[i](v)
	}
}

// A right angle, a tiny angle and opposite places, by hand.
func TestSeparation(t *testing.T) {
	require.InDelta(t, 90, Separation(0, 0, 90, 0), 1e-9)
	require.InDelta(t, 180, Separation(10, 20, 190, -20), 1e-5)
	require.InEpsilon(t, 1e-6*math.Cos(60/degreesPerRadian), Separation(0, 60, 1e-6, 60), 1e-6)
}
