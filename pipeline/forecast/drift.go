package forecast

import (
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/scene"
)

// Drift is how fast the light of a wavelength moves over the field.
type Drift struct {
	// NM is the wavelength, vacuum nm, of all ends of what is wanted the one that moves most.
	NM float64
	// ArcsecPerHour is the length of its motion, whichever way it goes.
	ArcsecPerHour float64
}

// RefractionDrift is the motion that refraction gives to what is wanted, against the light
// that is guided on, in the middle of so many science seconds behind a candidate's
// calibrations. Refracted light lies R (n(nm) - n(guide)) tan z from the guided towards the
// zenith, R the arc seconds of a radian (physics.DifferentialRefraction), so it moves with
// tan z and with the parallactic angle. The air is the forecast's, where that has none the
// site's; an atmosphere without refraction stands for a telescope that corrects it. Zero
// where nothing is wanted and where the target stands below the horizon.
func (l *Light) RefractionDrift(c Candidate, scienceSeconds float64) Drift {
	site := l.profile.Site
	air, guide := site.Atmosphere(), l.profile.Spectrograph.CenterNM
	if a := l.scene.Atmosphere; a != nil {
		if !a.Refraction {
			return Drift{}
		}
		air = a.Over(site)
		if a.GuideNM != nil {
			guide = *a.GuideNM
		}
	}
	const at45Degrees = 45 // tan z = 1
	var most, nm float64
	for _, w := range l.wanted {
		for _, end := range []float64{w.fromNM, w.toNM} {
			away := math.Abs(air.DifferentialRefraction(max(end, scene.LeastRefractedNM), guide, at45Degrees))
			if away > most {
				most, nm = away, end
			}
		}
	}
	const halfSeconds = 60
	middle := l.calibrationBefore(l.Time(c)) + scienceSeconds/2
	east0, north0 := l.towardsZenith(middle - halfSeconds)
	east1, north1 := l.towardsZenith(middle + halfSeconds)
	perHour := most * math.Hypot(east1-east0, north1-north0) * 3600 / (2 * halfSeconds)
	if math.IsNaN(perHour) || perHour == 0 {
		return Drift{}
	}
	return Drift{NM: nm, ArcsecPerHour: perHour}
}

// towardsZenith is tan z towards the zenith, so many seconds after the start; NaN below the
// horizon.
func (l *Light) towardsZenith(seconds float64) (east, north float64) {
	site, t := l.profile.Site, l.target
	at := l.start.Add(time.Duration(seconds * float64(time.Second)))
	z := physics.ApparentZenithDistance(physics.ZenithDistance(t.RADeg, t.DecDeg, at, site.LatitudeDeg, site.LongitudeEastDeg))
	if !(z < 90) {
		return math.NaN(), math.NaN()
	}
	tan := math.Tan(z * math.Pi / 180)
	sin, cos := math.Sincos(physics.TargetParallacticAngle(t.RADeg, t.DecDeg, at, site.LatitudeDeg, site.LongitudeEastDeg) * math.Pi / 180)
	return tan * sin, tan * cos
}
