package plan

import (
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/sequence"
)

// maxAirmass is where the planner begins to warn: extinction, and with it the
// slope of throughput over the night, grows quickly beyond (common practice, no
// source).
const maxAirmass = 2

// airmass is that of the field's centre at the start of the first science step,
// at the end of the last, and the largest at any start or end of one; 0 stands
// for a field below the horizon.
func airmass(s *sequence.Sequence) [3]float64 {
	return airmassOf(s, sequence.Science, s.Target.RADeg, s.Target.DecDeg)
}

// airmassOf is that of a place during the steps of a kind, as airmass gives it.
func airmassOf(s *sequence.Sequence, kind sequence.Kind, raDeg, decDeg float64) [3]float64 {
	at, err := s.Target.Start()
	if err != nil { // a checked target has a start
		return [3]float64{}
	}
	look := func() float64 {
		x := physics.TargetAirmass(raDeg, decDeg, at, s.Profile.Site.LatitudeDeg, s.Profile.Site.LongitudeEastDeg)
		if math.IsNaN(x) {
			return math.Inf(1)
		}
		return x
	}
	first, last, most := 0.0, 0.0, 0.0
	for _, st := range s.Steps {
		if st.Kind == kind && first == 0 {
			first = look()
			most = first
		}
		at = at.Add(time.Duration(st.ExptimeSeconds * float64(time.Second)))
		if st.Kind == kind {
			last = look()
			most = max(most, last)
		}
		at = at.Add(time.Duration(s.Profile.OverheadS() * float64(time.Second)))
	}
	return [3]float64{finite(first), finite(last), finite(most)}
}

func finite(x float64) float64 {
	if math.IsInf(x, 0) {
		return 0
	}
	return x
}
