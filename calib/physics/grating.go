package physics

import "math"

// MirrorGrating is an array of tilted mirrors seen as a blazed grating. The mirrors lie on a
// square lattice and tilt about their diagonal, so that along the tilt the lattice's lines
// follow each other at d = pitch/sqrt 2. Light that comes at an angle a to the array's
// normal, in the plane of the tilt and positive towards the side to which the mirrors turn
// their normal, leaves a mirror at 2 tilt - a; the orders of the lattice leave where
//
//	m L = d (sin a + sin b).
//
// An order is on the blaze, and holds all light, where b = 2 tilt - a:
//
//	m L = d (sin a + sin(2 tilt - a)) = 2 d sin(tilt) cos(tilt - a),
//
// at normal incidence d sin(2 tilt) (the grating equation; the lattice's turn by 45 degrees:
// tutorials on the diffraction of micromirrors). Between two such wavelengths the light is
// split among neighbouring orders. How the device is mounted does not matter to this: turned
// by 45 degrees the tilt lies along the dispersion, mounted square at 45 degrees to it.
type MirrorGrating struct {
	// PitchUM is the distance of neighbouring mirrors along their sides, um.
	PitchUM float64
	// TiltDeg is the mirrors' tilt from flat, degrees.
	TiltDeg float64
	// IncidenceDeg is a, degrees: 0 for light along the array's normal, TiltDeg for light
	// that returns to where it came from.
	IncidenceDeg float64
}

// PeriodUM is d, um: the period along the tilt, and across it.
func (g MirrorGrating) PeriodUM() float64 { return g.PitchUM / math.Sqrt2 }

// BlazeOrder is m at a wavelength, not rounded: near a whole number one order holds most of
// the light.
func (g MirrorGrating) BlazeOrder(nm float64) float64 { return g.OrderPeak(1) / nm }

// OrderPeak is the wavelength, nm, at which an order m is on the blaze.
func (g MirrorGrating) OrderPeak(m int) float64 {
	tilt, incidence := g.TiltDeg/degreesPerRadian, g.IncidenceDeg/degreesPerRadian
	return 2000 * g.PeriodUM() * math.Sin(tilt) * math.Cos(tilt-incidence) / float64(m)
}

// NearestOrder is the order whose peak is nearest to the blaze at a wavelength, at least 1;
// 0 where the blaze order is no number below 1e6.
func (g MirrorGrating) NearestOrder(nm float64) int {
	m := g.BlazeOrder(nm)
	if !(m > 0 && m < 1e6) {
		return 0
	}
	return max(1, int(math.Round(m)))
}

// Orders are the orders with a peak from one wavelength to another, nm, the lowest order
// (longest wavelength) first and at most 1000 of them.
func (g MirrorGrating) Orders(firstNM, lastNM float64) []int {
	const most = 1000
	var orders []int
	low, high := g.BlazeOrder(lastNM), g.BlazeOrder(firstNM)
	if !(low > 0 && high < 1e6) {
		return nil
	}
	for m := int(math.Ceil(low)); float64(m) <= high && len(orders) < most; m++ {
		orders = append(orders, m)
	}
	return orders
}
