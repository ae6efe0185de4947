package physics

import "math"

// Gnomonic projects a place on the plane that touches the sphere at (ra0, dec0): east and
// north offsets in arc seconds, places in degrees (FITS WCS paper II, Calabretta &
// Greisen 2002, A&A 395, 1077, section 5.1.3: TAN). NaN 90 degrees away and beyond.
func Gnomonic(raDeg, decDeg, ra0Deg, dec0Deg float64) (east, north float64) {
	v := unitVector(raDeg-ra0Deg, decDeg).aboutY(-dec0Deg) // the touching point is now x
	if !(v[0] > 0) {
		return math.NaN(), math.NaN()
	}
	return arcsecPerRadian * v[1] / v[0], arcsecPerRadian * v[2] / v[0]
}

// FromGnomonic inverts Gnomonic; raDeg is in 0..360.
func FromGnomonic(east, north, ra0Deg, dec0Deg float64) (raDeg, decDeg float64) {
	v := vector{1, east / arcsecPerRadian, north / arcsecPerRadian}.aboutY(dec0Deg)
	raDeg = wrap360(ra0Deg + math.Atan2(v[1], v[0])*degreesPerRadian)
	return raDeg, math.Atan2(v[2], math.Hypot(v[0], v[1])) * degreesPerRadian
}
