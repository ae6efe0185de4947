package physics

import (
	"math"
	"time"
)

const (
	au_m          = 149597870700.0 // IAU 2012 resolution B2
	secondsPerDay = 86400.0
	// obliquityJ2000Deg is the angle of ecliptic and equator at J2000 (IAU 1976).
	obliquityJ2000Deg = 23.4392911
)

// dynamicalDays counts days of terrestrial time from J2000: UTC + 32.184 s + the leap
// seconds. Before 1999 those of 1999 stand in, wrong by 22 s in 1972; after 2017 those
// of 2017, as long as none comes. Ten seconds are 0.06 m/s.
func dynamicalDays(utc time.Time) float64 {
	leaps := 32.0
	for _, since := range []struct {
		year  int
		month time.Month
	}{{2006, 1}, {2009, 1}, {2012, 7}, {2015, 7}, {2017, 1}} { // IERS, Bulletin C
		if !utc.Before(time.Date(since.year, since.month, 1, 0, 0, 0, 0, time.UTC)) {
			leaps++
		}
	}
	return daysSinceJ2000(utc) + (32.184+leaps)/secondsPerDay
}

// earthFromSun is the heliocentric place of the earth, in astronomical units, in the
// mean equator and equinox of J2000, at days of terrestrial time from J2000.
func earthFromSun(days float64) vector {
	t := days / 365250
	longitude, latitude := 1e-8*series(earthLongitude, t), 1e-8*series(earthLatitude, t)
	distance := 1e-8 * series(earthDistance, t)
	place := unitVector(longitude*degreesPerRadian, latitude*degreesPerRadian)
	// The mean obliquity of the date (IAU 1976; Meeus, formula 22.2), then precession.
	centuries := 10 * t
	obliquity := obliquityJ2000Deg - centuries*(46.8150+centuries*(0.00059-0.001813*centuries))/3600
	zeta, z, theta := precession(centuries)
	place = place.aboutX(-obliquity).aboutZ(z).aboutY(-theta).aboutZ(zeta)
	return vector{}.add(place, distance)
}

func series(powers [][]orbitTerm, t float64) float64 {
	sum := 0.0
	for i := len(powers) - 1; i >= 0; i-- {
		part := 0.0
		for _, term := range powers[i] {
			part += term.a * math.Cos(term.b+term.c*t)
		}
		sum = sum*t + part
	}
	return sum
}

// sunFromBarycentre is the place of the sun with respect to the solar system's
// barycentre, in the units and axes of earthFromSun: minus the sum of the planets'
// places weighted by their masses.
func sunFromBarycentre(days float64) vector {
	var sum vector
	mass := 1.0
	for _, p := range planets {
		sum = sum.add(p.place(days/36525), 1/p.sunMasses)
		mass += 1 / p.sunMasses
	}
	return vector{}.add(sum, -1/mass).aboutX(-obliquityJ2000Deg)
}

// place is the planet's in the ecliptic of J2000, t Julian centuries from J2000.
func (p *planet) place(t float64) vector {
	var now [6]float64
	for i := range now {
		now[i] = p.at[i] + p.change[i]*t
	}
	a, e, inclination, longitude, perihelion, node := now[0], now[1], now[2], now[3], now[4], now[5]
	mean := wrap360(longitude-perihelion) / degreesPerRadian
	eccentric := mean + e*math.Sin(mean)
	for range 10 { // Newton on Kepler's equation; e < 0.21 needs 4
		eccentric -= (eccentric - e*math.Sin(eccentric) - mean) / (1 - e*math.Cos(eccentric))
	}
	v := vector{a * (math.Cos(eccentric) - e), a * math.Sqrt(1-e*e) * math.Sin(eccentric), 0}
	return v.aboutZ(node - perihelion).aboutX(-inclination).aboutZ(-node)
}

// velocity is the derivative of a place in astronomical units by days, in m/s. Over
// a step of 0.02 days the third derivative of the moon's pull on the earth adds 1e-5 m/s,
// rounding 1e-6.
func velocity(place func(days float64) vector, days float64) vector {
	const half = 0.01
	step := place(days+half).add(place(days-half), -1)
	return vector{}.add(step, au_m/(2*half*secondsPerDay))
}
