package physics

import (
	"math"
	"time"
)

// SunAltitude is the geometric altitude of the sun's centre, degrees, from a site at a time:
// by the earth's place of BarycentricVelocity (truncated VSOP87). Aberration and parallax are
// left out: within 0.02 degrees of a full ephemeris.
func SunAltitude(utc time.Time, latitudeDeg, longitudeEastDeg float64) float64 {
	earth := earthFromSun(dynamicalDays(utc))
	ra, dec := directionOf(vector{-earth[0], -earth[1], -earth[2]})
	return 90 - ZenithDistance(ra, dec, utc, latitudeDeg, longitudeEastDeg)
}

// Moon is where the moon stands and how much of it is lit.
type Moon struct {
	// RADeg and DecDeg are its geocentric place, mean equator of J2000.
	RADeg, DecDeg float64
	// AltitudeDeg is that of its centre from the site, parallax included.
	AltitudeDeg float64
	// Lit is the part of its disc that the sun lights, 0 to 1.
	Lit float64
}

// MoonAt is the moon from a site at a time, by the short series of the Astronomical Almanac,
// page D46 (Low-precision formulae for geocentric coordinates of the Moon, 0.3 degrees in
// longitude and 0.2 in latitude). The lit part is (1 - cos elongation)/2 (Meeus,
// Astronomical Algorithms, formulas 48.1 and 48.2, the sun infinitely far off).
func MoonAt(utc time.Time, latitudeDeg, longitudeEastDeg float64) Moon {
	days := dynamicalDays(utc)
	t := days / 36525
	wave := func(amplitude, at0, perCentury float64) float64 { return amplitude * sinDeg(at0+perCentury*t) }
	longitude := 218.32 + 481267.881*t +
		wave(6.29, 135.0, 477198.87) + wave(-1.27, 259.3, -413335.36) + wave(0.66, 235.7, 890534.22) +
		wave(0.21, 269.9, 954397.74) + wave(-0.19, 357.5, 35999.05) + wave(-0.11, 186.5, 966404.03)
	latitude := wave(5.13, 93.3, 483202.02) + wave(0.28, 228.2, 960400.89) + wave(-0.28, 318.3, 6003.15) + wave(-0.17, 217.6, -407332.21)
	place := fromDate(unitVector(longitude, latitude).aboutX(-obliquityJ2000Deg), utc)
	var m Moon
	m.RADeg, m.DecDeg = directionOf(place)
	geocentric := 90 - ZenithDistance(m.RADeg, m.DecDeg, utc, latitudeDeg, longitudeEastDeg)
	const distance = 60.27 // earth radii, the mean
	m.AltitudeDeg = math.Atan2(sinDeg(geocentric)-1/distance, cosDeg(geocentric)) * degreesPerRadian
	earth := earthFromSun(days)
	m.Lit = (1 + place.dot(earth)/earth.length()) / 2
	return m
}

// Separation is the angle between two places, degrees.
func Separation(ra1Deg, dec1Deg, ra2Deg, dec2Deg float64) float64 {
	a, b := unitVector(ra1Deg, dec1Deg), unitVector(ra2Deg, dec2Deg)
	return 2 * math.Asin(min(1, a.add(b, -1).length()/2)) * degreesPerRadian
}

// directionOf is where a vector points, degrees.
func directionOf(v vector) (raDeg, decDeg float64) {
	return wrap360(math.Atan2(v[1], v[0]) * degreesPerRadian), math.Atan2(v[2], math.Hypot(v[0], v[1])) * degreesPerRadian
}
