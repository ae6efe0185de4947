package physics

import "math"

// StripArray is an array of tilted mirrors whose elements are strips.
type StripArray struct {
	MirrorGrating
	// Diagonal says that the tilt lies across the strips, and with it the mirrors' diagonals;
	// otherwise their sides do.
	Diagonal bool
	// Mirrors is an element's width, in mirrors where sides lie across the strips, in lines
	// of mirrors PeriodUM apart where diagonals do. At least 1.
	Mirrors int
}

// StepUM is the distance of neighbouring lines of mirrors across the strips, um.
func (a StripArray) StepUM() float64 {
	if a.Diagonal {
		return a.PeriodUM()
	}
	return a.PitchUM
}

// WidthUM is the width of an element, um.
func (a StripArray) WidthUM() float64 { return a.StepUM() * float64(a.Mirrors) }

// Neighbour is d: two neighbouring open elements, evenly lit, give d (f + f)/2 more than
// each alone, f the light of one: what the edges between them diffract past the pupil while
// only one of them is open. Where the mirrors on both sides of an edge are out of phase, midway
// between two orders' peaks, it is less than zero: then light is lost while both are open.
//
// Derivation (ours; no published source). The light through the pupil is a quadratic form of
// the open mirrors' amplitudes: f of an element with itself and 2 K(1) of a pair, whence
// d = 2 K(1)/f. Every direction of the beam is a plane wave of its own (see Taken), which an
// aperture whose amplitude has the transform A(s) spreads by |A(s)|^2 about where the mirrors
// send it, and part(s) of a chord of directions arrives in the pupil. With x and y the sines
// across and along the strips in units of L/StepUM, e = Mirrors, m the blaze order of the chord,
// and strips so long that along them only the orders y of the mirrors' period are left,
//
//	K(D) = mean over chords of sum_y int E(x, y) F(z) cos(2 pi e D z) part(x, y) dx,
//	F(z) = (sin(pi e z)/sin(pi z))^2,   f = K(0),
//	sides across:     y = k - m for all k, z = x + m,       E = sinc^2(x) sinc^2(y)
//	diagonals across: y = n/2 for all n,   z = x + y + m,   E = sinc^2(x + y) sinc^2(x - y).
//
// For flat mirrors and elements wide against L N this goes to d = L/(pi^2 width) int_0^inf (1 -
// overlap(s))/s^2 ds, overlap the common area of beam and pupil moved by s over that of the beam,
// and sqrt 2 times that for diagonals, whose edges are longer: |d| goes with the wavelength and
// falls with the width and the pupil's oversize. Gaps between mirrors, foreshortening,
// polarization and aberrations are left out. Elements two apart are coupled by a tenth or less.
//
// Good to 2e-3 (absolute): elements of more than four mirrors are computed at four and scaled
// by their width, and so are mirrors of which more than 8 orders fit into the cones' radii. NaN
// outside of the limits of the fields, and where mirrors are so small that no light arrives.
func (a StripArray) Neighbour(nm float64, b Beam) float64 {
	if !b.valid() || !(nm > 0 && a.PitchUM > 0 && !math.IsInf(a.PitchUM, 1)) || a.Mirrors < 1 {
		return math.NaN()
	}
	const widest, orders = 4, 16
	scale := 1.0
	if a.Mirrors > widest {
		scale = widest / float64(a.Mirrors)
		a.Mirrors = widest
	}
	unit := nm / 1000 / a.StepUM()
	if least := (1 + b.Oversize) * b.radius() / orders; unit < least {
		scale *= unit / least
		unit = least
	}
	var alone, pair float64
	for _, c := range b.chords(10) {
		f, k := a.couplings(nm, unit, c, b)
		alone += c.weight * f
		pair += c.weight * k
	}
	return 2 * pair / alone * scale
}

// couplings are K(0) and K(1) of a chord; unit is the sine of x = 1.
func (a StripArray) couplings(nm, unit float64, c chord, b Beam) (alone, pair float64) {
	const perPeriod = 16
	big := b.Oversize * b.radius()
	at := a.blaze(nm, c.t)
	reach := (big + b.radius()) / unit
	e := float64(a.Mirrors)
	_, phase := math.Modf(at.order)
	first, spacing := -phase, 1.0 // of y
	if a.Diagonal {
		first, spacing = 0, 0.5
	}
	for k := math.Ceil((-reach - first) / spacing); first+k*spacing < reach; k++ {
		y := first + k*spacing
		limit := math.Sqrt(max(0, (reach-y)*(reach+y)))
		n := 32 + int(2*limit*e*perPeriod)
		for i := range n {
			x := limit * (2*(float64(i)+0.5)/float64(n) - 1)
			z, tilt, across := x+phase, (x+y)/math.Sqrt2, (y-x)/math.Sqrt2
			if a.Diagonal {
				z, tilt, across = x+y+phase, x, y
			}
			part := c.into(big, at.out(tilt*unit), across*unit)
			if part == 0 {
				continue
			}
			s := sinc(x) * sinc(y)
			if a.Diagonal {
				s = sinc(x+y) * sinc(x-y)
			}
			light := s * s * lines(a.Mirrors, z) * part * 2 * limit / float64(n)
			alone += light
			pair += light * math.Cos(2*math.Pi*e*z)
		}
	}
	return alone, pair
}

// lines is F(z) of n lines.
func lines(n int, z float64) float64 {
	_, z = math.Modf(z)
	d := math.Sin(math.Pi * z)
	if math.Abs(d) < 1e-9 {
		return float64(n) * float64(n)
	}
	f := math.Sin(math.Pi*float64(n)*z) / d
	return f * f
}
