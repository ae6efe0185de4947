package physics

import (
	"math"
	"time"
)

// Airmass is the relative optical air mass at an apparent (refracted) zenith
// distance z in degrees (Kasten & Young 1989, Appl. Opt. 28, 4735):
//
//	X = 1/(cos z + 0.50572 (96.07995 - z)^-1.6364).
//
// It is 0.99971 at the zenith, as published. NaN outside 0..90.
func Airmass(apparentZenithDeg float64) float64 {
	if !(apparentZenithDeg >= 0) || apparentZenithDeg > 90 {
		return math.NaN()
	}
	return 1 / (cosDeg(apparentZenithDeg) + 0.50572*math.Pow(96.07995-apparentZenithDeg, -1.6364))
}

// ApparentZenithDistance adds the refraction of the atmosphere, at 10 degrees C
// and 1010 hPa, to a geometric zenith distance, all in degrees: Saemundsson
// 1986 (Sky & Telescope 72, 70) as in Meeus, Astronomical Algorithms, 2nd
// edition, formula 16.4; within 0.5 arcmin of a full model above 5 degrees of
// altitude. Below the horizon (beyond 90) the distance is returned as it is.
func ApparentZenithDistance(geometricZenithDeg float64) float64 {
	h := 90 - geometricZenithDeg
	if h < 0 {
		return geometricZenithDeg
	}
	arcminutes := 1.02 / math.Tan((h+10.3/(h+5.11))/degreesPerRadian)
	// The fit is negative, by a few arcseconds, within a degree of the zenith.
	return geometricZenithDeg - max(arcminutes, 0)/60
}

// SiderealTime is the mean sidereal time, in degrees 0..360, at an east
// longitude in degrees: IAU 1982, as in Meeus, Astronomical Algorithms, 2nd
// edition, formula 12.4. UTC stands for UT1 (they differ by < 0.9 s, 0.004 deg).
func SiderealTime(utc time.Time, longitudeEastDeg float64) float64 {
	days := daysSinceJ2000(utc)
	t := days / 36525
	theta := 280.46061837 + 360.98564736629*days + t*t*(0.000387933-t/38710000)
	return wrap360(theta + longitudeEastDeg)
}

// ZenithDistance is the geometric zenith distance, in degrees, of an ICRS place
// (RA, DEC in degrees) seen from a geographic latitude and east longitude at a
// time: precession to the date (Lieske et al. 1977, as in Meeus chapter 21),
// mean sidereal time, spherical trigonometry. Nutation, aberration and UT1-UTC
// are left out: good to 0.02 degrees within a century of 2000. Refraction is
// ApparentZenithDistance's.
func ZenithDistance(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg float64) float64 {
	ra, dec := precess(raDeg, decDeg, utc)
	hourAngle := SiderealTime(utc, longitudeEastDeg) - ra
	// atan2 of the two components keeps its accuracy at the zenith, where the
	// arc cosine loses half the digits.
	sinH, cosH := sinDeg(hourAngle), cosDeg(hourAngle)
	east := cosDeg(dec) * sinH
	north := cosDeg(latitudeDeg)*sinDeg(dec) - sinDeg(latitudeDeg)*cosDeg(dec)*cosH
	up := sinDeg(latitudeDeg)*sinDeg(dec) + cosDeg(latitudeDeg)*cosDeg(dec)*cosH
	return math.Atan2(math.Hypot(east, north), up) * degreesPerRadian
}

// TargetAirmass is the air mass of an ICRS place from a site at a time:
// Airmass(ApparentZenithDistance(ZenithDistance(...))); NaN below the horizon.
func TargetAirmass(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg float64) float64 {
	return Airmass(ApparentZenithDistance(ZenithDistance(raDeg, decDeg, utc, latitudeDeg, longitudeEastDeg)))
}

// precess takes a place from the mean equator and equinox of J2000 to those of
// the date, by the angles zeta, z, theta of Lieske et al. 1977 (A&A 58, 1) as in
// Meeus, formulas 21.3 and 21.4.
func precess(raDeg, decDeg float64, utc time.Time) (ra, dec float64) {
	zeta, z, theta := precession(daysSinceJ2000(utc) / 36525)
	a := cosDeg(decDeg) * sinDeg(raDeg+zeta)
	b := cosDeg(theta)*cosDeg(decDeg)*cosDeg(raDeg+zeta) - sinDeg(theta)*sinDeg(decDeg)
	c := sinDeg(theta)*cosDeg(decDeg)*cosDeg(raDeg+zeta) + cosDeg(theta)*sinDeg(decDeg)
	ra = wrap360(math.Atan2(a, b)*degreesPerRadian + z)
	return ra, math.Atan2(c, math.Hypot(a, b)) * degreesPerRadian
}

// precession gives the angles of precess in degrees for t Julian centuries from J2000.
func precession(t float64) (zeta, z, theta float64) {
	zeta = t * (2306.2181 + t*(0.30188+t*0.017998)) / 3600
	z = t * (2306.2181 + t*(1.09468+t*0.018203)) / 3600
	theta = t * (2004.3109 - t*(0.42665+t*0.041833)) / 3600
	return zeta, z, theta
}

// daysSinceJ2000 counts days from 2000-01-01 12:00.
func daysSinceJ2000(utc time.Time) float64 {
	const j2000 = 946728000 // Unix seconds
	return (float64(utc.Unix()-j2000) + float64(utc.Nanosecond())*1e-9) / 86400
}

func wrap360(deg float64) float64 {
	deg = math.Mod(deg, 360)
	if deg < 0 {
		deg += 360
	}
	return deg
}

func sinDeg(deg float64) float64 { return math.Sin(deg / degreesPerRadian) }
func cosDeg(deg float64) float64 { return math.Cos(deg / degreesPerRadian) }
