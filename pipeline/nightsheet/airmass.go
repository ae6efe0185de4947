package nightsheet

import (
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/sequence"
)

// AirmassAt is the airmass at a time.
type AirmassAt struct {
	UTC string `json:"utc"`
	// Airmass is that of the field's centre, 0 below the horizon.
	Airmass float64 `json:"airmass"`
	seconds float64 // since the start
}

// airmassSamples are how many times of the night are listed.
const airmassSamples = 25

// airmassOf lists the airmass from the first exposure's start to the last one's end.
func airmassOf(s *sequence.Sequence, start time.Time, seconds float64) []AirmassAt {
	site := s.Profile.Site
	list := make([]AirmassAt, airmassSamples)
	for i := range list {
		after := seconds * float64(i) / (airmassSamples - 1)
		at := start.Add(time.Duration(after * float64(time.Second))).Round(time.Second)
		x := physics.TargetAirmass(s.Target.RADeg, s.Target.DecDeg, at, site.LatitudeDeg, site.LongitudeEastDeg)
		if math.IsNaN(x) || math.IsInf(x, 0) {
			x = 0
		}
		list[i] = AirmassAt{at.UTC().Format(time.RFC3339), math.Round(x*1e4) / 1e4, after}
	}
	return list
}
