package physics

import "math"

// A vector has rectangular components x, y, z.
type vector [3]float64

func (v vector) dot(w vector) float64 { return v[0]*w[0] + v[1]*w[1] + v[2]*w[2] }

func (v vector) add(w vector, times float64) vector {
	return vector{v[0] + times*w[0], v[1] + times*w[1], v[2] + times*w[2]}
}

func (v vector) length() float64 { return math.Sqrt(v.dot(v)) }

// aboutX, aboutY and aboutZ give the components of v in axes that are turned by an
// angle in degrees, from y to z, from z to x and from x to y.
func (v vector) aboutX(deg float64) vector {
	s, c := sinDeg(deg), cosDeg(deg)
	return vector{v[0], c*v[1] + s*v[2], c*v[2] - s*v[1]}
}

func (v vector) aboutY(deg float64) vector {
	s, c := sinDeg(deg), cosDeg(deg)
	return vector{c*v[0] - s*v[2], v[1], s*v[0] + c*v[2]}
}

func (v vector) aboutZ(deg float64) vector {
	s, c := sinDeg(deg), cosDeg(deg)
	return vector{c*v[0] + s*v[1], c*v[1] - s*v[0], v[2]}
}
