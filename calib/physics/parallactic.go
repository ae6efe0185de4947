package physics

import (
	"math"
	"time"
)

// ParallacticAngle is the position angle of the zenith, north through east, seen from a
// place on the sky: degrees in -180..180, positive west of the meridian,
//
//	q = atan2(cos p sin H, sin p cos d - cos p sin d cos H),
//
// H the hour angle (west positive), d the declination, p the latitude, all of one
// equator and in degrees (Smart, Textbook on Spherical Astronomy, 6th edition, section
// 34). It has no meaning at the zenith, where it is 0.
func ParallacticAngle(hourAngleDeg, decDeg, latitudeDeg float64) float64 {
	east := cosDeg(latitudeDeg) * sinDeg(hourAngleDeg)
	north := sinDeg(latitudeDeg)*cosDeg(decDeg) - cosDeg(latitudeDeg)*sinDeg(decDeg)*cosDeg(hourAngleDeg)
	return math.Atan2(east, north) * degreesPerRadian
}

// TargetParallacticAngle is the position angle of the zenith, from the north of ICRS
// through east, seen from an ICRS place at a time and site: degrees in -180..180. The
// zenith of the date is taken to ICRS, so that the turn of north by precession is in it.
// Left out are nutation and aberration: good to 0.01 degrees over the sine of the zenith
// distance.
func TargetParallacticAngle(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg float64) float64 {
	zenith := fromDate(unitVector(SiderealTime(utc, longitudeEastDeg), latitudeDeg), utc)
	zenithRA := math.Atan2(zenith[1], zenith[0]) * degreesPerRadian
	zenithDec := math.Atan2(zenith[2], math.Hypot(zenith[0], zenith[1])) * degreesPerRadian
	// The zenith is the place of hour angle 0 on the equator of ICRS.
	return ParallacticAngle(zenithRA-raDeg, decDeg, zenithDec)
}

// TargetHourAngle is the hour angle of an ICRS place, in degrees, -180..180, west
// positive, at a time and an east longitude; precessed to the date.
func TargetHourAngle(raDeg, decDeg float64, utc time.Time, longitudeEastDeg float64) float64 {
	ra, _ := precess(raDeg, decDeg, utc)
	return wrap360(SiderealTime(utc, longitudeEastDeg)-ra+180) - 180
}

// unitVector points to a place on the sphere.
func unitVector(longitudeDeg, latitudeDeg float64) vector {
	return vector{
		cosDeg(latitudeDeg) * cosDeg(longitudeDeg),
		cosDeg(latitudeDeg) * sinDeg(longitudeDeg),
		sinDeg(latitudeDeg),
	}
}

// fromDate takes a vector from the mean equator and equinox of a date to those of
// J2000, the inverse of precess.
func fromDate(v vector, utc time.Time) vector {
	zeta, z, theta := precession(daysSinceJ2000(utc) / 36525)
	return v.aboutZ(z).aboutY(-theta).aboutZ(zeta)
}
