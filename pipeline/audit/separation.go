package audit

import "math"

// separation is how far a move is from leaving all as it is: chi-square falls by delta
// if the move is right and rises by as much if it is not, with the variance
//
//	4 (delta + noise)
//
// either way. The noise is there because the light of every pixel is free: what checks
// the one meaning of a frame is light for the other. So the gain's own half is no
// logarithm of odds unless the frames' light is well above the noise.
type separation struct{ delta, noise float64 }

// logOdds of a move that gains so much, against leaving all as it is: of two normal
// distributions, at +delta and -delta. A gain beyond twice delta proves no more.
func (p separation) logOdds(gain float64) float64 {
	if p.delta <= 0 {
		return math.Inf(-1)
	}
	return min(gain, 2*p.delta) * p.delta / (2 * (p.delta + p.noise))
}

// expected is the logarithm of the odds that a right move is expected to have.
func (p separation) expected() float64 { return p.logOdds(p.delta) }

// exchange separates the pairing of rows k and i from its opposite: with a = e_k - e_i,
// p = a'Pa/2 and D the light between the two readings, delta = 2 p D and the variance
// is 4 (1-p) (delta + 4 p pixels).
func (s *state) exchange(k, i int) separation {
	p, light := s.apart(k, i)
	return s.exchanged(p, light)
}

// exchanged, in terms of 4 (delta + noise), keeps a little more noise.
func (s *state) exchanged(p, light float64) separation {
	return separation{2 * p * light, 4 * p * (1 - p) * float64(s.pixels)}
}

// apart is the p and the D of exchange.
func (s *state) apart(k, i int) (p, light float64) {
	p = (s.projector.At(k, k) + s.projector.At(i, i) - 2*s.projector.At(k, i)) / 2
	light, _ = cheapest(s.sum.At(k, k)-s.noise[k], s.sum.At(k, i), s.sum.At(i, i)-s.noise[i], 0)
	return p, light
}

// between separates the meanings w and own of the frame of an erased row k. With unit
// checks o and x of the two, noise is (1 - (o'x)^2) pixels; delta is the misfit of own
// with the light that w predicts.
func (s *state) between(k int, w, own []float64) separation {
	x, normX := s.check(k, w)
	o, normO := s.check(k, own)
	var a, b, c, both float64
	both = 1
	for i := range x {
		both += x[i] * o[i]
		if x[i] == 0 && o[i] == 0 {
			continue
		}
		row := s.sum.RawRowView(i)
		gotX, gotO := dot(row, x)-s.noise[i]*x[i], dot(row, o)-s.noise[i]*o[i]
		a += x[i] * gotX
		b += x[i] * gotO
		c += o[i] * gotO
	}
	value, _ := cheapest(a, b, c, 0)
	rho := both / math.Sqrt(normX*normO)
	return separation{value / normO, (1 - rho*rho) * float64(s.pixels)}
}
