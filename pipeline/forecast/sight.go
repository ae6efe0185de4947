package forecast

import (
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/scene"
)

// sight is the air that a candidate's science frames look through, in steps fine enough for
// a forecast, so that candidates of about the same length share their light. Without an
// atmosphere in the forecast but for the airmass, all are the same.
type sight struct {
	airmass float64
	// centiAirmass dims; centiTan, 100 tan z, and parallacticDeg move.
	centiAirmass, centiTan, parallacticDeg int
}

// sightOf is the mean over the science frames, at their middle for refraction.
func (l *Light) sightOf(t Time) sight {
	const samples = 9
	begin := l.calibrationBefore(t)
	site := l.profile.Site
	sum, seen := 0.0, 0
	for i := range samples {
		seconds := begin + t.ScienceSeconds*(float64(i)+0.5)/samples
		at := l.start.Add(time.Duration(seconds * float64(time.Second)))
		if x := physics.TargetAirmass(l.target.RADeg, l.target.DecDeg, at, site.LatitudeDeg, site.LongitudeEastDeg); !math.IsNaN(x) {
			sum += x
			seen++
		}
	}
	if seen < samples { // the field sets: there is no mean to speak of
		return sight{}
	}
	s := sight{airmass: sum / samples}
	air := l.scene.Atmosphere
	if air == nil {
		return s
	}
	if len(air.Extinction) > 0 {
		s.centiAirmass = int(math.Round(100 * s.airmass))
	}
	if air.Refraction {
		middle := l.start.Add(time.Duration((begin + t.ScienceSeconds/2) * float64(time.Second)))
		z := physics.ApparentZenithDistance(physics.ZenithDistance(l.target.RADeg, l.target.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg))
		s.centiTan = int(math.Round(100 * math.Tan(z*math.Pi/180)))
		s.parallacticDeg = int(math.Round(physics.TargetParallacticAngle(l.target.RADeg, l.target.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg)))
	}
	return s
}

// calibrationBefore is the time from the start to the first science frame: all calibration
// but the reference star's.
func (l *Light) calibrationBefore(t Time) float64 {
	before := t.CalibrationSeconds
	if star := l.target.Calibration.RefStar; star != nil {
		before -= float64(star.Count) * (star.DwellSeconds + l.profile.OverheadS())
	}
	return before
}

// transmission is the part of the light of sources that the air lets through.
func (l *Light) transmission(s sight) func(nm float64) float64 {
	if s.centiAirmass == 0 {
		return func(float64) float64 { return 1 }
	}
	curve := l.scene.Atmosphere.Extinction.Curve()
	low, high := curve[0].VacuumNm, curve[len(curve)-1].VacuumNm
	return func(nm float64) float64 {
		// Beyond the table's ends the air is as it is there, as for the scene.
		return physics.AirTransmission(curve.At(min(max(nm, low), high)), float64(s.centiAirmass)/100)
	}
}

// bend is how far the light of a wavelength stands above where it would without air,
// arc seconds.
func (l *Light) bend(s sight) func(nm float64) float64 {
	air := l.scene.Atmosphere
	guide := l.profile.Spectrograph.CenterNM
	if air.GuideNM != nil {
		guide = *air.GuideNM
	}
	const at45Degrees = 45 // tan z = 1
	atmosphere := air.Over(l.profile.Site)
	return func(nm float64) float64 {
		return atmosphere.DifferentialRefraction(max(nm, scene.LeastRefractedNM), guide, at45Degrees) * float64(s.centiTan) / 100
	}
}
