package rehearse

import "math"

// fwhmPerSigma is 2 sqrt(2 ln 2).
const fwhmPerSigma = 2.3548200450309493

// normal is the cumulative distribution of the unit normal.
func normal(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }

// bell is the density of the normal of mean 0 and standard deviation sigma.
func bell(x, sigma float64) float64 {
	t := x / sigma
	return math.Exp(-0.5*t*t) / (sigma * math.Sqrt(2*math.Pi))
}

// share is the part of a unit normal of width sigma, centred at 0, that lies
// between from and to. Far from the centre the difference of the small tails is
// taken, which keeps its digits.
func share(from, to, sigma float64) float64 {
	a, b := from/sigma, to/sigma
	if a > 0 {
		return normal(-a) - normal(-b)
	}
	return normal(b) - normal(a)
}

// besselI0Scaled is exp(-x) I0(x), x >= 0, to 5e-7 of itself (Abramowitz &
// Stegun 9.8.1 and 9.8.2).
func besselI0Scaled(x float64) float64 {
	if x < 3.75 {
		t := x / 3.75
		t *= t
		return math.Exp(-x) * (1 + t*(3.5156229+t*(3.0899424+t*(1.2067492+t*(0.2659732+t*(0.0360768+t*0.0045813))))))
	}
	t := 3.75 / x
	return (0.39894228 + t*(0.01328592+t*(0.00225319+t*(-0.00157565+t*(0.00916281+t*(-0.02057706+t*(0.02635537+t*(-0.01647633+t*0.00392377)))))))) / math.Sqrt(x)
}
