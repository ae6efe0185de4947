package physics

import (
	"math"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// By hand: on the meridian the zenith is north of a southern target and south of a
// northern one; six hours west, from the equator, it is due east.
func TestParallacticAngleByHand(t *testing.T) {
	require.InDelta(t, 0, ParallacticAngle(0, -10, 30), 1e-12)
	require.InDelta(t, 180, math.Abs(ParallacticAngle(0, 60, 30)), 1e-12)
	require.InDelta(t, 90, ParallacticAngle(90, 0, 0), 1e-12)
	require.InDelta(t, -90, ParallacticAngle(-90, 0, 0), 1e-12)
	require.Zero(t, ParallacticAngle(0, 30, 30))
	rapid.Check(t, func(t *rapid.T) { // the sine rule: sin q sin z = cos p sin H; east and west mirror each other
		h, d, p := rapid.Float64Range(-179, 179).Draw(t, "H"), rapid.Float64Range(-89, 89).Draw(t, "d"), rapid.Float64Range(-89, 89).Draw(t, "p")
		q := ParallacticAngle(h, d, p)
		cosZ := sinDeg(p)*sinDeg(d) + cosDeg(p)*cosDeg(d)*cosDeg(h)
		// Near the zenith 1 - cos^2 z keeps half of its digits.
		require.InDelta(t, cosDeg(p)*sinDeg(h), sinDeg(q)*math.Sqrt(max(0, 1-cosZ*cosZ)), 5e-8)
		require.InDelta(t, -q, ParallacticAngle(-h, d, p), 1e-12)
	})
}

// astropy's position angle of the zenith, all over the sky above 5 degrees: within 0.02
// degrees over the sine of the zenith distance.
func TestCrosscheckParallactic(t *testing.T) {
	worst, count := 0.0, 0
	for _, c := range barycentreAnswersOf(t).Places {
		if c.Altitude < 5 {
			continue
		}
		utc, err := time.Parse("2006-01-02T15:04:05", c.UTC)
		require.NoError(t, err)
		got := TargetParallacticAngle(c.RA, c.Dec, utc, c.Latitude, c.LongitudeEast)
		miss := math.Mod(got-c.Parallactic+540, 360) - 180
		worst = max(worst, math.Abs(miss)*cosDeg(c.Altitude))
		count++
		// That of the date differs from it by the turn of north.
		of := ParallacticAngle(TargetHourAngle(c.RA, c.Dec, utc, c.LongitudeEast), c.Dec, c.Latitude)
		require.Less(t, math.Abs(math.Mod(of-got+540, 360)-180)*min(cosDeg(c.Dec), cosDeg(c.Altitude)), 0.5)
	}
	t.Logf("off by %.4f deg times sin z at most, %d places", worst, count)
	require.Greater(t, count, 100)
	require.Less(t, worst, 0.02)
}
