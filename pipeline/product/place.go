package product

import (
	"math"

	"mirrorloom/calib/physics"
)

const arcsecPerDeg = 3600

// Offset is where the cube's WCS puts a place of it, element and detector row from 0, in
// the plane that touches the sky at (RADeg, DecDeg): arc seconds east and north.
func (s Schema) Offset(element, row float64) (east, north float64) {
	sin, cos := math.Sincos(s.RotangDeg * math.Pi / 180)
	x := (element - s.centre()) * s.C1Deg * arcsecPerDeg * s.parity()
	y := (row - s.RowCenter) * s.C2Deg * arcsecPerDeg
	return -x*cos + y*sin, x*sin + y*cos
}

// Place is the place of the cube, element and detector row from 0, of an offset: it
// inverts Offset.
func (s Schema) Place(east, north float64) (element, row float64) {
	sin, cos := math.Sincos(s.RotangDeg * math.Pi / 180)
	x, y := -east*cos+north*sin, east*sin+north*cos
	element = s.centre() + x*s.parity()/(s.C1Deg*arcsecPerDeg)
	return element, s.RowCenter + y/(s.C2Deg*arcsecPerDeg)
}

// Sky is the ICRS place, degrees, of a place of the cube.
func (s Schema) Sky(element, row float64) (raDeg, decDeg float64) {
	east, north := s.Offset(element, row)
	return physics.FromGnomonic(east, north, s.RADeg, s.DecDeg)
}

// Repointed is the schema after a correction of the pointing: what its WCS puts at
// (e, n) in the plane is at (e + east + t n, n + north - t e), t the turn of its position
// angle in radians. The place of the plane's touching point moves with it, which turns the
// field by up to the shift times the tangent of the declination more: a shift of an arc
// second at 80 degrees by 6 arc seconds, nothing within the field.
func (s Schema) Repointed(eastArcsec, northArcsec, turnDeg float64) Schema {
	s.RADeg, s.DecDeg = physics.FromGnomonic(eastArcsec, northArcsec, s.RADeg, s.DecDeg)
	s.RotangDeg += turnDeg
	return s
}

func (s Schema) parity() float64 {
	if s.Parity < 0 {
		return -1
	}
	return 1
}

// PlaceOf inverts Sky; not a number behind the horizon of the plane.
func (s Schema) PlaceOf(raDeg, decDeg float64) (element, row float64) {
	return s.Place(physics.Gnomonic(raDeg, decDeg, s.RADeg, s.DecDeg))
}
