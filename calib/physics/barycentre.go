package physics

import (
	"math"
	"time"
)

// Velocity is what a spectrum needs to be brought from the observer to the solar
// system's barycentre (or to the sun's centre).
type Velocity struct {
	// Projection_m_s is the observer's velocity with respect to the barycentre, towards the
	// target: positive where the observer approaches it and the target looks too blue.
	// To add to a measured radial velocity.
	Projection_m_s float64
	// Factor is wavelength at the barycentre over wavelength observed,
	//
	//	gamma (1 + b) / (1 - u/c^2),
	//
	// b = Projection/c, gamma of the observer's speed (time dilation) and u the depth of
	// the potentials of sun and earth at the observer (Wright & Eastman 2014, PASP 126,
	// 838, equations 9 and 28, without the terms of the target's own motion and parallax).
	// c (Factor - 1) is 4.5 to 4.8 m/s above Projection.
	Factor float64
}

// BarycentricVelocity is the motion of an observer at geodetic latitude and east
// longitude (degrees) and a height in metres, towards an ICRS place at a time:
//
//   - the turning earth (WGS 84, mean sidereal time), up to 465 m/s;
//   - the earth about the sun, the moon's pull in it (truncated VSOP87, see
//     earthLongitude), 30 km/s;
//   - the sun about the barycentre (eight planets on Kepler's ellipses), up to 16 m/s.
//
// Within 0.5 m/s from 1990 to 2040 against a full ephemeris (see the test); left out are
// nutation, UT1-UTC and polar motion (below 0.05 m/s).
func BarycentricVelocity(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg, heightM float64) Velocity {
	return observerVelocity(raDeg, decDeg, utc, latitudeDeg, longitudeEastDeg, heightM, true)
}

// HeliocentricVelocity is BarycentricVelocity with respect to the sun's centre.
func HeliocentricVelocity(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg, heightM float64) Velocity {
	return observerVelocity(raDeg, decDeg, utc, latitudeDeg, longitudeEastDeg, heightM, false)
}

func observerVelocity(raDeg, decDeg float64, utc time.Time, latitudeDeg, longitudeEastDeg, heightM float64, barycentric bool) Velocity {
	const (
		sunGM_m3_s2   = 1.32712440018e20
		earthGM_m3_s2 = 3.986004418e14
		earthRadius_m = 6378137.0
	)
	days := dynamicalDays(utc)
	v := velocity(earthFromSun, days)
	if barycentric {
		v = v.add(velocity(sunFromBarycentre, days), 1)
	}
	v = v.add(turningVelocity(utc, latitudeDeg, longitudeEastDeg, heightM), 1)
	projection := v.dot(unitVector(raDeg, decDeg))
	const square = LightSpeed_m_s * LightSpeed_m_s
	gamma := 1 / math.Sqrt(1-v.dot(v)/square)
	depth := sunGM_m3_s2/(earthFromSun(days).length()*au_m) + earthGM_m3_s2/(earthRadius_m+heightM)
	return Velocity{
		Projection_m_s: projection,
		Factor:         gamma * (1 + projection/LightSpeed_m_s) / (1 - depth/square),
	}
}

// turningVelocity is the velocity of a place of the earth about its axis, m/s, in the
// equator and equinox of J2000.
func turningVelocity(utc time.Time, latitudeDeg, longitudeEastDeg, heightM float64) vector {
	const (
		equatorial_m   = 6378137.0 // WGS 84
		flattening     = 1 / 298.257223563
		turn_rad_per_s = 7.292115e-5
	)
	sin := sinDeg(latitudeDeg)
	normal := equatorial_m / math.Sqrt(1-flattening*(2-flattening)*sin*sin)
	speed := turn_rad_per_s * (normal + heightM) * cosDeg(latitudeDeg)
	east := SiderealTime(utc, longitudeEastDeg) + 90
	return fromDate(vector{speed * cosDeg(east), speed * sinDeg(east), 0}, utc)
}
