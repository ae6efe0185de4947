package forecast

import (
	"math"

	"mirrorloom/hadamard"
)

// noiseModel tells the noise of a candidate's pixels.
type noiseModel struct {
	light     *Light
	field     *fieldLight
	design    hadamard.Design
	candidate Candidate
	read      float64 // ReadNoiseVariance
	dark      float64 // electrons a second
	scatter   float64 // rms of a frame's transmission
	cycles    float64 // frames of each step
	// What is taken off all frames: the means of so many frames.
	bias, darks, off int
	darkDwell        float64
	pedestal         int               // dark columns whose mean is taken off; 0 for none
	squares          map[int][]float64 // by detector row
}

// pedestalColumns is over how many pixels of a row the reduction averages dark decodes where
// they stand for all-off frames.
const pedestalColumns = 7

func newNoiseModel(l *Light, f *fieldLight, c Candidate, of taken) *noiseModel {
	k := l.target.Calibration
	n := &noiseModel{
		light: l, field: f, design: c.Design(), candidate: c,
		dark: l.camera.darkEPS, scatter: of.throughput, cycles: of.cycles,
		bias: k.Bias.Count, darks: k.Dark.Count, darkDwell: k.Dark.DwellSeconds, off: allOff(l.target, c.V*c.Cycles), squares: map[int][]float64{},
	}
	n.read = n.design.ReadNoiseVariance()
	if n.off == 0 && checks(c) {
		n.pedestal = c.Dark
	}
	return n
}

// checks tells whether there are dark columns enough for what the reduction does by them.
func checks(c Candidate) bool { return c.Dark > 0 && float64(c.Dark) >= 2*math.Log2(float64(c.V)) }

// pixels is the noise of element j in the pixels of a window.
func (n *noiseModel) pixels(j int, win *window) []pixelNoise {
	width := win.x1 - win.x0 + 1
	rows := map[int][]float64{}
	list := make([]pixelNoise, win.size())
	own := make([]float64, width)
	for y := win.y0; y <= win.y1; y++ {
		n.light.untrace(own, win.x0, y, func(q int) []float64 {
			light := rows[q]
			if light == nil {
				light = make([]float64, width)
				n.field.element(light, j, q, win.x0, func(int) bool { return true }, false)
				rows[q] = light
			}
			return light
		})
		for i, v := range own {
			list[win.at(win.x0+i, y)] = n.at(win.x0+i, y, v)
		}
	}
	return list
}

// at is the noise of a pixel for an element of so many electrons a second.
func (n *noiseModel) at(x, y int, own float64) pixelNoise {
	d, t, cycles := n.design, n.candidate.DwellSeconds, n.cycles
	camera := n.light.camera
	row := n.field.pixelRow(y)
	leak := row.leak[x] * t
	quiet := camera.quiet[camera.amplifier(x, y)]
	p := pixelNoise{light: own * t, overlap: row.overlap[x] * t, leak: leak}
	p.own = Parts{
		Photons:  camera.photon * d.PhotonVariance(p.light, p.overlap) / cycles,
		Detector: n.read * quiet / cycles,
		Dark:     n.read * camera.photon * n.dark * t / cycles,
		Leak:     n.read * camera.photon * leak / cycles,
	}
	p.level = n.level(quiet, leak)
	if n.pedestal > 0 {
		p.level.DarkColumns = (p.own.Photons + p.own.Detector + p.own.Dark + p.own.Leak) / float64(n.pedestal*pedestalColumns)
	}
	p.own.Level = p.level.total()
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
	if n.squares[y] == nil {
		n.squares[y] = make([]float64, n.light.camera.columns)
		n.light.untrace(n.squares[y], 0, y, func(q int) []float64 { return n.field.squaresOf(q, n.candidate) })
	}
	return n.design.ThroughputNoise(n.scatter, p.overlap, max(n.squares[y][x], 0)*t*t)
}

// level is the variance, in a decoded element, of what is taken off all frames, by the
// frames that give it: a constant decodes to 1/k of itself.
func (n *noiseModel) level(quiet, leak float64) Levels {
	camera, t, k := n.light.camera, n.candidate.DwellSeconds, float64(n.design.K)
	var v Levels
	if n.bias > 0 {
		v.Bias = quiet / float64(n.bias)
	}
	switch {
	case n.off > 0: // as long as the science frames
		v = Levels{AllOff: (quiet + camera.photon*(n.dark*t+leak)) / float64(n.off)}
	case n.darks > 0:
		ratio := t / n.darkDwell
		v.Dark = ratio * ratio * (quiet + camera.photon*n.dark*n.darkDwell) / float64(n.darks)
		v.Bias *= (1 - ratio) * (1 - ratio)
	}
	v.scale(1 / (k * k))
	return v
}

// addShared adds the covariances of elements at a pixel to the variance of a sum, and to that
// of its levels (see the package's documentation).
func (n *noiseModel) addShared(v *Parts, levels *Levels, x, y int, o *overlapped) {
	pairs := o.weight*o.weight - o.square
	if pairs == 0 {
		return
	}
	d, t, cycles := n.design, n.candidate.DwellSeconds, n.cycles
	camera := n.light.camera
	quiet, leak := camera.quiet[camera.amplifier(x, y)], n.field.pixelRow(y).leak[x]*t
	k, l := float64(d.K), float64(d.L)
	constant := -l / (k * k * (k - l)) / cycles * pairs
	v.Detector += constant * quiet
	v.Dark += constant * camera.photon * n.dark * t
	v.Leak += constant * camera.photon * leak
	level := n.level(quiet, leak)
	v.Level += level.total() * pairs
	levels.add(pairs, &level)
	if d.V > 2 {
		light := 2 * (o.light*o.weight - o.squareLight)
		v.Photons -= camera.photon * l / (k * (k - l) * float64(d.V-2)) / cycles * (o.overlap*pairs - light)
	}
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
