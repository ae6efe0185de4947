package forecast

import "math"

// fwhmPerSigma is 2 sqrt(2 ln 2).
const fwhmPerSigma = 2.3548200450309493

// normal is the distribution function of the unit normal law.
func normal(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }

// between is the part of a unit Gaussian of width sigma between a and b, accurate in both
// tails.
func between(a, b, sigma float64) float64 {
	if a > 0 {
		a, b = -b, -a
	}
	return normal(b/sigma) - normal(a/sigma)
}

// image is how a source's light, 1 in all, falls on mirrors; lengths in mirrors of the
// device, column and row its own.
type image interface {
	// part is that of a mirror whose centre is dc columns and dr rows from the image's.
	part(dc, dr float64) float64
	// reach is the distance beyond which nothing to speak of falls.
	reach() float64
}

// roundImage is a Gaussian.
type roundImage struct{ sigma float64 }

func (g roundImage) part(dc, dr float64) float64 {
	return between(dc-0.5, dc+0.5, g.sigma) * between(dr-0.5, dr+0.5, g.sigma)
}

func (g roundImage) reach() float64 { return 6.5*g.sigma + 1 }

// profileImage is a round profile behind the seeing, its brightness tabulated by radius
// every step mirrors and 0 beyond.
type profileImage struct {
	step       float64
	brightness []float64
}

func (p *profileImage) reach() float64 { return float64(len(p.brightness)-2) * p.step }

// part is the integral over the mirror by Gauss's rule of 2 x 2 points.
func (p *profileImage) part(dc, dr float64) float64 {
	const node = 0.28867513459481287 // 1/(2 sqrt 3)
	sum := 0.0
	for _, c := range [2]float64{dc - node, dc + node} {
		for _, r := range [2]float64{dr - node, dr + node} {
			sum += p.at(math.Hypot(c, r))
		}
	}
	return sum / 4
}

func (p *profileImage) at(radius float64) float64 {
	at := radius / p.step
	i := int(at)
	if i+1 >= len(p.brightness) {
		return 0
	}
	low := p.brightness[i]
	return low + (p.brightness[i+1]-low)*(at-float64(i))
}

// blurSteps a sigma of the seeing, or of a narrower rim, is how finely profiles are
// tabulated: straight lines between them err by 5e-4 of the curvature's scale.
const blurSteps = 16

// mostRadii bounds the work for a source far wider than the seeing.
const mostRadii = 4000

// newProfileImage convolves a round profile of any scale, which ends at `end`, with a
// Gaussian seeing. With R the distance from the image's centre,
//
//	B(R) = int ds s g(s) (1/pi) int_0^pi dphi P(sqrt(R^2 + s^2 - 2 R s cos phi)),
//
// g the seeing: Simpson's rule in s, the trapezium rule in phi, which converges faster than
// any power for such an integrand. Scaled to a total of 1.
func newProfileImage(profile func(radius float64) float64, end, sigma, finest float64) *profileImage {
	const (
		nodes  = 32 // in s, to 6 sigma
		angles = 32
		wide   = 6.0
	)
	step := max(min(sigma, finest)/blurSteps, end/mostRadii)
	image := &profileImage{step: step, brightness: make([]float64, int((end+wide*sigma)/step)+2)}
	var weight, s [nodes + 1]float64
	h := wide * sigma / nodes
	for i := range s {
		s[i] = float64(i) * h
		w := 2.0
		switch {
		case i == 0 || i == nodes:
			w = 1
		case i%2 == 1:
			w = 4
		}
		weight[i] = w * s[i] * math.Exp(-0.5*(s[i]/sigma)*(s[i]/sigma))
	}
	var cosine [angles + 1]float64
	for i := range cosine {
		cosine[i] = math.Cos(math.Pi * float64(i) / angles)
	}
	total := 0.0
	for k := range image.brightness {
		r := float64(k) * step
		sum := 0.0
		for i, w := range weight {
			ring := 0.0
			for a, c := range cosine {
				v := profile(math.Sqrt(max(0, r*r+s[i]*s[i]-2*r*s[i]*c)))
				if a == 0 || a == angles {
					v /= 2
				}
				ring += v
			}
			sum += w * ring
		}
		image.brightness[k] = sum
		total += sum * 2 * math.Pi * r * step
	}
	for k := range image.brightness {
		image.brightness[k] /= total
	}
	return image
}
