package physics

import "math"

// MaxBeamOrders is how many orders may lie across both cones for Taken to follow them.
const MaxBeamOrders = 150

// Taken is the share of the light of an array, all of whose mirrors are on and evenly lit,
// that the pupil behind takes up; the beam's axis comes at the grating's IncidenceDeg and the
// pupil lies where the mirrors send that.
//
// Every direction of the beam is a plane wave of its own: the telescope's image of a point
// is smaller than a mirror, so mirrors are lit incoherently and the pupil's points add up.
// The wave from the sine t towards the tilt makes the orders (h, k) of the lattice, at
// distances L/pitch along the mirrors' sides, with
//
//	share of (h, k) = sinc^2(m - h) sinc^2(m - k), m = BlazeOrder for this direction,
//
// which add up to 1: square mirrors without gaps, not foreshortened (scalar theory, Fraunhofer;
// Goodman, Introduction to Fourier Optics). So two things blur the orders: a fast beam makes
// each order a cone, which overlaps others and is cut by the pupil only in part; and m changes
// over the pupil by -2 d sin^2(tilt) t/L. Both grow with the beam's speed. What Taken lacks of 1
// at a peak is what m's change puts into other orders.
//
// The sum over the pupil is exact across the tilt (chords) and has 200 steps along it. NaN
// outside of a beam's limits, or where more than MaxBeamOrders orders lie within the cones:
// no order stands out among so many.
func (g MirrorGrating) Taken(nm float64, b Beam) float64 {
	r := b.radius()
	spacing := nm / 1000 / g.PitchUM // of orders along the sides, as a sine
	reach := (1 + b.Oversize) * r / spacing
	if !b.valid() || !(nm > 0) || !(reach <= MaxBeamOrders) {
		return math.NaN()
	}
	taken := 0.0
	for _, c := range b.chords(200) {
		taken += c.weight * g.takenOf(nm, c, b)
	}
	return taken
}

// takenOf is Taken of a chord along the tilt.
func (g MirrorGrating) takenOf(nm float64, c chord, b Beam) float64 {
	big := b.Oversize * b.radius()
	at := g.blaze(nm, c.t)
	step := nm / 1000 / g.PeriodUM()
	reach := int(math.Ceil((1+b.Oversize)*b.radius()*g.PitchUM/(nm/1000))) + 2
	middle := int(math.Round(at.order))
	taken := 0.0
	// (h, k) is moved from where the mirrors send the light by step ((h+k)/2 - m) along the
	// tilt and by step (k-h)/2 across it.
	for sum := 2 * (middle - reach); sum <= 2*(middle+reach); sum++ {
		out := at.out(step * (float64(sum)/2 - at.order))
		if math.Abs(out) >= big {
			continue
		}
		for diff := -2*reach + sum&1; diff <= 2*reach; diff += 2 {
			if part := c.into(big, out, step*float64(diff)/2); part > 0 {
				a := sinc(at.order-float64(sum-diff)/2) * sinc(at.order-float64(sum+diff)/2)
				taken += a * a * part
			}
		}
	}
	return taken
}

// blazed is where mirrors send a direction of a beam.
type blazed struct {
	order float64 // m, not rounded
	sine  float64 // of the angle b to the array's normal
	axis  float64 // b of the beam's axis, rad
}

// blaze follows the direction that comes at the sine t from the beam's axis, towards the tilt.
func (g MirrorGrating) blaze(nm, t float64) blazed {
	tilt, incidence := g.TiltDeg/degreesPerRadian, g.IncidenceDeg/degreesPerRadian
	in := incidence + math.Asin(t)
	sine := math.Sin(2*tilt - in)
	return blazed{(math.Sin(in) + sine) * 1000 * g.PeriodUM() / nm, sine, 2*tilt - incidence}
}

// out is the sine, from where the mirrors send the beam's axis, of light whose sine to the
// array's normal lies shift from that of the mirrors' direction; 2, which no pupil takes, where
// no light leaves the array.
func (b blazed) out(shift float64) float64 {
	sine := b.sine + shift
	if math.Abs(sine) >= 1 {
		return 2
	}
	return math.Sin(math.Asin(sine) - b.axis)
}
