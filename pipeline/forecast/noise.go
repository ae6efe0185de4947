package forecast

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
)

// noiseModel tells the noise of a candidate's pixels.
type noiseModel struct {
	light     *Light
	field     *fieldLight
	design    hadamard.Design
	candidate Candidate
	geometry  calib.Geometry
	read      float64 // ReadNoiseVariance
	dark      float64 // electrons a second
	scatter   float64 // rms of a frame's transmission
	// What is taken off all frames: the means of so many frames.
	bias, darks, off int
	darkDwell        float64
	pedestal         int // dark columns whose mean is taken off; 0 for none
}

// pedestalColumns is over how many pixels of a row the reduction averages dark decodes where
// they stand for all-off frames.
const pedestalColumns = 7

func newNoiseModel(l *Light, f *fieldLight, c Candidate, throughput float64) *noiseModel {
	k := l.target.Calibration
	n := &noiseModel{
		light: l, field: f, design: c.Design(), candidate: c, geometry: l.geometry(c.N, c.ElementMirrors),
		dark: l.camera.darkEPS, scatter: throughput,
		bias: k.Bias.Count, darks: k.Dark.Count, darkDwell: k.Dark.DwellSeconds, off: allOff(l.target, c.V*c.Cycles),
	}
	n.read = n.design.ReadNoiseVariance()
	if n.off == 0 && checks(c) {
		n.pedestal = c.Dark
	}
	return n
}

// checks tells whether there are dark columns enough for what the reduction does by them.
func checks(c Candidate) bool { return c.Dark > 0 && float64(c.Dark) >= 2*math.Log2(float64(c.V)) }

// A traced pixel lies among the trace rows q, q+1, q+2, q+3: what it holds is a cubic of what
// they do, by Lagrange's weights. Light varies over rows as a Gaussian of FWHM 3 px or more.
type traced struct {
	q      int
	weight [4]float64
}

// trace finds a pixel among the trace rows.
func (n *noiseModel) trace(x, y int) traced {
	at := float64(y) - n.geometry.TraceShift(float64(x))
	low := math.Floor(at)
	p := at - low
	return traced{int(low) - 1, [4]float64{-p * (p - 1) * (p - 2) / 6, (p + 1) * (p - 1) * (p - 2) / 2, -(p + 1) * p * (p - 2) / 2, (p + 1) * p * (p - 1) / 6}}
}

// of is the cubic of a row's value.
func (t traced) of(value func(q int) float64) float64 {
	sum := 0.0
	for i, w := range t.weight {
		if w != 0 {
			sum += w * value(t.q+i)
		}
	}
	return sum
}

// overlapAt is all elements' light at a pixel, electrons a second.
func (n *noiseModel) overlapAt(x, y int) float64 {
	return n.trace(x, y).of(func(q int) float64 { return n.field.row(q).overlap[x] })
}

// leakAt is what all mirrors of the device leak there when closed, electrons a second.
func (n *noiseModel) leakAt(x, y int) float64 {
	return n.trace(x, y).of(func(q int) float64 { return n.field.row(q).leak[x] })
}

// pixels is the noise of element j in the pixels of a window.
func (n *noiseModel) pixels(j int, win *window) []pixelNoise {
	rows := map[int][]float64{}
	own := func(q, x int) float64 {
		light := rows[q]
		if light == nil {
			light = make([]float64, win.x1-win.x0+1)
			n.field.element(light, j, q, win.x0, func(int) bool { return true }, false)
			rows[q] = light
		}
		return light[x-win.x0]
	}
	list := make([]pixelNoise, win.size())
	for y := win.y0; y <= win.y1; y++ {
		for x := win.x0; x <= win.x1; x++ {
			light := n.trace(x, y).of(func(q int) float64 { return own(q, x) })
			list[win.at(x, y)] = n.at(x, y, light)
		}
	}
	return list
}

// at is the noise of a pixel for an element of so many electrons a second.
func (n *noiseModel) at(x, y int, own float64) pixelNoise {
	d, t, cycles := n.design, n.candidate.DwellSeconds, float64(n.candidate.Cycles)
	camera := n.light.camera
	leak := n.leakAt(x, y) * t
	quiet := camera.quiet[camera.amplifier(x, y)]
	p := pixelNoise{light: own * t, overlap: n.overlapAt(x, y) * t}
	p.own = Parts{
		Photons:  camera.photon * d.PhotonVariance(p.light, p.overlap) / cycles,
		Detector: n.read * quiet / cycles,
		Dark:     n.read * camera.photon * n.dark * t / cycles,
		Leak:     n.read * camera.photon * leak / cycles,
	}
	p.own.Level = n.level(quiet, leak)
	if n.pedestal > 0 {
		p.own.Level += (p.own.Photons + p.own.Detector + p.own.Dark + p.own.Leak) / float64(n.pedestal*pedestalColumns)
	}
	if n.scatter > 0 {
		p.scatter = n.scatterOf(x, y, &p) / math.Sqrt(cycles)
	}
	return p
}

// scatterOf is the standard deviation that scatter of the transmission gives an element.
func (n *noiseModel) scatterOf(x, y int, p *pixelNoise) float64 {
	if n.design.L == 0 { // one element a frame
		return n.scatter * p.light
	}
	t := n.candidate.DwellSeconds
	squares := n.trace(x, y).of(func(q int) float64 { return n.field.squares(q, x, n.candidate.N) })
	return n.design.ThroughputNoise(n.scatter, p.overlap, max(squares, 0)*t*t)
}

// level is the variance, in a decoded element, of what is taken off all frames: a constant
// decodes to 1/k of itself.
func (n *noiseModel) level(quiet, leak float64) float64 {
	camera, t, k := n.light.camera, n.candidate.DwellSeconds, float64(n.design.K)
	bias := 0.0
	if n.bias > 0 {
		bias = quiet / float64(n.bias)
	}
	variance := bias
	switch {
	case n.off > 0: // as long as the science frames
		variance = (quiet + camera.photon*(n.dark*t+leak)) / float64(n.off)
	case n.darks > 0:
		ratio := t / n.darkDwell
		own := quiet + camera.photon*n.dark*n.darkDwell
		variance = ratio*ratio*own/float64(n.darks) + (1-ratio)*(1-ratio)*bias
	}
	return variance / (k * k)
}

// addShared adds the covariances of elements at a pixel to the variance of a sum (see the
// package's documentation).
func (n *noiseModel) addShared(v *Parts, x, y int, o *overlapped) {
	pairs := o.weight*o.weight - o.square
	if pairs == 0 {
		return
	}
	d, t, cycles := n.design, n.candidate.DwellSeconds, float64(n.candidate.Cycles)
	camera := n.light.camera
	quiet, leak := camera.quiet[camera.amplifier(x, y)], n.leakAt(x, y)*t
	k, l := float64(d.K), float64(d.L)
	constant := -l / (k * k * (k - l)) / cycles * pairs
	v.Detector += constant * quiet
	v.Dark += constant * camera.photon * n.dark * t
	v.Leak += constant * camera.photon * leak
	v.Level += n.level(quiet, leak) * pairs
	if d.V > 2 {
		light := 2 * (o.light*o.weight - o.squareLight)
		v.Photons -= camera.photon * l / (k * (k - l) * float64(d.V-2)) / cycles * (o.overlap*pairs - light)
	}
}

// squares is the sum of the squares of the elements' light at column x of a trace row,
// electrons a second squared.
func (f *fieldLight) squares(q, x, elements int) float64 {
	r := f.row(q)
	if r.squares == nil {
		r.squares = make([]float64, len(r.overlap))
		light := make([]float64, len(r.overlap))
		for j := range elements {
			clear(light)
			f.element(light, j, q, 0, func(int) bool { return true }, false)
			for i, v := range light {
				r.squares[i] += v * v
			}
		}
	}
	return r.squares[x]
}

// throughputLeft is the scatter of the frames' transmission that is left in the data: what
// the target says, d, or less where dark columns measure it. Of a frame's factor the g dark
// columns see g/v; a pixel of y electrons, s^2 its variance, measures it to s/y. So the sum
// I of y^2/s^2 over the detector leaves d^2 b/(d^2 + b), b = v/(g I).
func (l *Light) throughputLeft(f *fieldLight, c Candidate) float64 {
	d := l.target.Forecast.ThroughputRMS
	if d == 0 || !checks(c) {
		return d
	}
	const sampled = 8 // rows
	rows := l.profile.Detector.Rows
	design, information := c.Design(), 0.0
	open := float64(design.K) / float64(design.V) * c.DwellSeconds
	for i := range sampled {
		q := (2*i + 1) * rows / (2 * sampled)
		for x, overlap := range f.row(q).overlap {
			y := overlap * open
			information += y * y / (y + l.camera.quiet[l.camera.amplifier(x, q)])
		}
	}
	information *= float64(rows) / sampled
	if information == 0 {
		return d
	}
	b := float64(design.V) / (float64(c.Dark) * information)
	return math.Sqrt(d * d * b / (d*d + b))
}
