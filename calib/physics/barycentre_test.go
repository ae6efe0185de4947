package physics

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"strconv"
	"sync"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// What calib_barycentre.py answers; run once for the tests of this package.
type barycentreAnswers struct {
	Places []struct {
		UTC                                      string
		RA, Dec, Latitude, LongitudeEast, Height float64
		Plain, Heliocentric                      float64 // m/s
		Factor                                   float64
		Altitude, Parallactic                    float64
	}
	Refraction []struct{ Pressure, Celsius, Vapour, Zenith, Nm, Arcsec float64 }
}

var askBarycentre = sync.OnceValue(func() *barycentreAnswers { return new(barycentreAnswers) })

func barycentreAnswersOf(t *testing.T) *barycentreAnswers {
	t.Helper()
	answers := askBarycentre()
	if answers.Places == nil {
		require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_barycentre.py")), answers))
		require.Len(t, answers.Places, 300)
	}
	return answers
}

// The ten rows of barycentric.csv. Column simple_projection is Projection, column
// barycentric c (Factor-1), column heliocentric, with the redshift of neither sun nor
// earth in it, the plain projection of the velocity about the sun (see origin.md).
func TestBarycentricTable(t *testing.T) {
	file, err := os.Open("testdata/barycentric.csv")
	require.NoError(t, err)
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	require.NoError(t, err)
	require.Len(t, rows, 11)
	worst, worstFull, worstHelio := 0.0, 0.0, 0.0
	for _, row := range rows[1:] {
		utc, err := time.Parse("2006-01-02T15:04:05", row[0])
		require.NoError(t, err)
		var n [9]float64
		for i := range n[1:] {
			n[i+1], err = strconv.ParseFloat(row[i+1], 64)
			require.NoError(t, err)
		}
		v := BarycentricVelocity(n[1], n[2], utc, n[3], n[4], n[5])
		h := HeliocentricVelocity(n[1], n[2], utc, n[3], n[4], n[5])
		worst = max(worst, math.Abs(v.Projection_m_s-1000*n[8]))
		worstFull = max(worstFull, math.Abs(LightSpeed_m_s*(v.Factor-1)-1000*n[6]))
		worstHelio = max(worstHelio, math.Abs(h.Projection_m_s-1000*n[7]))
	}
	t.Logf("off by at most: projection %.3f, barycentric %.3f, heliocentric %.3f m/s", worst, worstFull, worstHelio)
	require.Less(t, worst, 0.5)
	require.Less(t, worstFull, 0.5)
	require.Less(t, worstHelio, 0.5)
}

// astropy at 300 times of 1990 to 2040, places and sites.
func TestCrosscheckBarycentric(t *testing.T) {
	worst, worstFull, worstHelio, square := 0.0, 0.0, 0.0, 0.0
	places := barycentreAnswersOf(t).Places
	for _, c := range places {
		utc, err := time.Parse("2006-01-02T15:04:05", c.UTC)
		require.NoError(t, err)
		v := BarycentricVelocity(c.RA, c.Dec, utc, c.Latitude, c.LongitudeEast, c.Height)
		h := HeliocentricVelocity(c.RA, c.Dec, utc, c.Latitude, c.LongitudeEast, c.Height)
		miss := v.Projection_m_s - c.Plain
		square += miss * miss / float64(len(places))
		worst = max(worst, math.Abs(miss))
		worstFull = max(worstFull, LightSpeed_m_s*math.Abs(v.Factor-c.Factor))
		worstHelio = max(worstHelio, math.Abs(h.Projection_m_s-c.Heliocentric))
	}
	t.Logf("projection off by %.3f m/s rms, %.3f at most; factor %.3f, heliocentric %.3f", math.Sqrt(square), worst, worstFull, worstHelio)
	require.Less(t, math.Sqrt(square), 0.2)
	require.Less(t, worst, 0.5) // as the docs say
	require.Less(t, worstFull, 0.5)
	require.Less(t, worstHelio, 0.5)
}

// By hand: at the equator, six hours before and after the meridian, the turning earth
// carries the observer at 465.1 m/s (7.292115e-5 rad/s times 6378137 m) to and from a
// target on the equator of the date; at the pole not at all.
func TestTurningEarth(t *testing.T) {
	utc := time.Date(2010, 5, 5, 3, 0, 0, 0, time.UTC)
	towards := func(hourAngle, latitude float64) float64 {
		target := fromDate(unitVector(SiderealTime(utc, 30)-hourAngle, 0), utc)
		return turningVelocity(utc, latitude, 30, 0).dot(target)
	}
	require.InDelta(t, 465.101, towards(-90, 0), 1e-3)
	require.InDelta(t, -465.101, towards(90, 0), 1e-3)
	require.InDelta(t, 0, towards(0, 0), 1e-9)
	require.InDelta(t, 0, towards(-90, 90), 1e-9)
}

func TestLeapSeconds(t *testing.T) {
	for year, want := range map[int]float64{1999: 64.184, 2005: 64.184, 2006: 65.184, 2010: 66.184, 2013: 67.184, 2016: 68.184, 2020: 69.184} {
		utc := time.Date(year, 3, 1, 0, 0, 0, 0, time.UTC)
		require.InDelta(t, want, (dynamicalDays(utc)-daysSinceJ2000(utc))*secondsPerDay, 1e-5)
	}
}
