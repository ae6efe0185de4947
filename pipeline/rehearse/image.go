package rehearse

import "math"

// image is how an emitter's light, 1 in all, falls on the mirrors; column and
// row are the device's.
type image interface {
	// fraction is the part that falls on the square of a mirror, whole numbers where a
	// mirror is.
	fraction(column, row float64) float64
}

// uniformImage gives every mirror the same.
type uniformImage float64

func (u uniformImage) fraction(float64, float64) float64 { return float64(u) }

// gaussianImage is a round Gaussian (a star or a Gaussian source behind the
// seeing): a mirror's share is the product of two differences of error
// functions. Lengths in mirrors.
type gaussianImage struct {
	column, row, sigma float64
}

func (g gaussianImage) fraction(column, row float64) float64 {
	dc, dr := column-g.column, row-g.row
	reach := 0.5 + 9*g.sigma // beyond lies less than 1e-18
	if math.Abs(dc) > reach || math.Abs(dr) > reach {
		return 0
	}
	return share(dc-0.5, dc+0.5, g.sigma) * share(dr-0.5, dr+0.5, g.sigma)
}

// radialImage is a round source with a tabulated brightness behind the seeing.
// A mirror's share is the integral over its square by Gauss's rule of 3 x 3
// points: the seeing is wider than a mirror, and at sigma of one mirror the rule
// errs by less than 1e-5.
type radialImage struct {
	column, row float64
	// brightness[i] is that at radius i step, 1/mirror^2; step in mirrors.
	brightness []float64
	step       float64
}

func (r *radialImage) fraction(column, row float64) float64 {
	const node, side, middle = 0.3872983346207417, 5.0 / 18, 8.0 / 18 // Gauss-Legendre on -1/2..1/2
	dc, dr := column-r.column, row-r.row
	reach := float64(len(r.brightness)-3)*r.step - 1
	if dc*dc+dr*dr > reach*reach {
		return 0
	}
	nodes, weights := [3]float64{-node, 0, node}, [3]float64{side, middle, side}
	sum := 0.0
	for i, wi := range weights {
		for k, wk := range weights {
			sum += wi * wk * r.at(math.Hypot(dc+nodes[i], dr+nodes[k]))
		}
	}
	return sum
}

// at interpolates the brightness with the cubic through four points; below
// radius 0 it goes on as it does above.
func (r *radialImage) at(radius float64) float64 {
	p := radius / r.step
	i := int(p)
	t := p - float64(i)
	b := r.brightness
	before := b[1]
	if i > 0 {
		before = b[i-1]
	}
	return before*(-t*(t-1)*(t-2)/6) + b[i]*((t+1)*(t-1)*(t-2)/2) + b[i+1]*(-(t+1)*t*(t-2)/2) + b[i+2]*((t+1)*t*(t-1)/6)
}

// blurred tabulates a round profile, of any scale, behind a seeing of width
// sigma, out to `reach`, all in mirrors, and scales it to a total of 1:
//
//	B(r) = int r' P(r') exp(-(r^2 + r'^2)/2 sigma^2) I0(r r'/sigma^2) dr' / sigma^2
//
// by Simpson's rule with sigma/16 between points, which leaves 1e-6.
func blurred(profile func(radius float64) float64, reach, sigma float64) (brightness []float64, step float64) {
	step = sigma / 16
	inner := 2 * (int(reach/step)/2 + 1) // intervals, even
	source, total := make([]float64, inner+1), 0.0
	for i := range source {
		radius := float64(i) * step
		source[i] = simpson(i, inner) * step / 3 * radius * profile(radius)
		total += 2 * math.Pi * source[i]
	}
	brightness = make([]float64, inner+int(reachSigmas*sigma/step)+4)
	around := int(9 * sigma / step)
	for i := range brightness {
		radius, sum := float64(i)*step, 0.0
		for k := max(i-around, 0); k <= min(i+around, inner); k++ {
			from := float64(k) * step
			d := (radius - from) / sigma
			sum += source[k] * math.Exp(-0.5*d*d) * besselI0Scaled(radius*from/(sigma*sigma))
		}
		brightness[i] = sum / (sigma * sigma * total)
	}
	return brightness, step
}

// simpson is the weight 1 4 2 4 ... 4 1 of point i of n intervals.
func simpson(i, n int) float64 {
	switch {
	case i == 0 || i == n:
		return 1
	case i%2 == 1:
		return 4
	}
	return 2
}

// imageOf is how a source falls on the mirrors behind a seeing (full width at
// half maximum, arc seconds), moved by guiding by du and dw arc seconds along u
// and w.
func (f *field) imageOf(s *Source, seeing, du, dw float64) image {
	u, w := f.along(s.EastArcsec, s.NorthArcsec)
	column, row := f.device(u+du, w+dw)
	sigma := seeing / fwhmPerSigma / f.arcsecPerMirror
	radius, width := s.RadiusArcsec/f.arcsecPerMirror, s.WidthArcsec/fwhmPerSigma/f.arcsecPerMirror
	var profile func(float64) float64
	reach := 0.0
	switch s.Kind {
	case KindGalaxy:
		profile = func(r float64) float64 { return math.Exp(-r / radius) }
		reach = min(25*radius, math.Hypot(float64(f.columns), float64(f.rows))*2)
	case KindRing:
		profile = func(r float64) float64 { d := (r - radius) / width; return math.Exp(-0.5 * d * d) }
		reach = radius + 8*width
	default: // a star has width 0
		return gaussianImage{column: column, row: row, sigma: math.Hypot(sigma, width)}
	}
	brightness, step := blurred(profile, reach, sigma)
	return &radialImage{column: column, row: row, brightness: brightness, step: step}
}
