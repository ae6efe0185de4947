package physics

import "math"

// BeamHalfAngle is the half-angle of an f/N beam, degrees: atan(1/(2N)) (common practice;
// the sine condition's asin is 6 % more at f/2 and 0.8 % at f/4).
func BeamHalfAngle(fNumber float64) float64 {
	if !(fNumber > 0) {
		return math.NaN()
	}
	return math.Atan(1/(2*fNumber)) * degreesPerRadian
}

// FastestFNumber is the f-number at which the beams that a mirror sends away when on, flat
// and off touch: a mirror of a tilt turns the light by twice that, so half-angles must stay
// below the tilt, N > 1/(2 tan tilt) (common practice).
func FastestFNumber(tiltDeg float64) float64 {
	return 1 / (2 * math.Tan(tiltDeg/degreesPerRadian))
}

// Beam is the light at a mirror array in the focus of a telescope and the pupil that takes
// it up behind.
type Beam struct {
	// FNumber is the focal ratio of the light that comes.
	FNumber float64
	// Oversize is the diameter of the pupil behind over that of the beam's image there, at
	// least 1.
	Oversize float64
	// ObscuredFraction is the share of the beam's area in the shadow of a central
	// obstruction, 0 <= f < 1. The pupil behind has none.
	ObscuredFraction float64
}

// radius is the sine of the beam's half-angle.
func (b Beam) radius() float64 { return math.Sin(BeamHalfAngle(b.FNumber) / degreesPerRadian) }

// valid says whether the fields are within their limits.
func (b Beam) valid() bool {
	return b.FNumber > 0 && b.Oversize >= 1 && !math.IsInf(b.Oversize, 1) && b.ObscuredFraction >= 0 && b.ObscuredFraction < 1
}

// chord is a set of directions of the beam alike along one axis: the sine t there, from
// -half to half across it, and their share of all directions.
type chord struct{ t, half, weight float64 }

// chords divide the beam into n, weights adding up to 1. The obstruction's shadow counts
// as a beam of negative weight.
func (b Beam) chords(n int) []chord {
	var all []chord
	disc := func(r, weight float64) {
		for i := range n {
			// Equal steps of the angle around the disc crowd where the chord is short.
			s, c := math.Sincos(math.Pi * (float64(i) + 0.5) / float64(n))
			all = append(all, chord{r * c, r * s, weight * 2 * s * s / float64(n)})
		}
	}
	r, f := b.radius(), b.ObscuredFraction
	disc(r, 1/(1-f))
	if f > 0 {
		disc(math.Sqrt(f)*r, -f/(1-f))
	}
	return all
}

// into is the share of a chord that a pupil of a radius takes where the chord arrives at out
// along its axis and is moved across by across.
func (c chord) into(radius, out, across float64) float64 {
	if math.Abs(out) >= radius {
		return 0
	}
	pupil := math.Sqrt((radius - out) * (radius + out))
	return max(0, min(c.half, pupil-across)-max(-c.half, -pupil-across)) / (2 * c.half)
}
