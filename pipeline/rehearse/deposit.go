package rehearse

import (
	"math"

	"mirrorloom/calib/physics"
)

// mirrorRow is what all mirrors of one w share on the drawing grid.
type mirrorRow struct {
	w   int
	row float64 // detector row without trace shift
	// start[i] is the dispersed distance at grid point i of a mirror at u_mid:
	// X_i - x_c - slant.
	start []float64
	// stretch[i] is d start/d X there: a continuum's density along the trace is
	// that along the dispersion times this.
	stretch []float64
}

func (o *optics) newMirrorRow(w int) *mirrorRow {
	g := &o.geometry
	m := &mirrorRow{w: w, row: g.row(w), start: make([]float64, o.axis.n), stretch: make([]float64, o.axis.n)}
	for i := range m.start {
		x := o.axis.at(i)
		y := m.row + g.trace(x)
		m.start[i] = x - g.XCenterPx - g.slant(y)
		m.stretch[i] = 1 - g.slantSlope(y)*g.traceSlope(x)
	}
	return m
}

// density is light on the drawing grid in electrons per second and pixel along
// the trace; only points from <= i < to are not 0.
type density struct {
	h        []float64
	from, to int
	// shaped and shares are scratch of light behind air.
	shaped, shares []float64
}

func (d *density) clear() {
	if d.from < d.to {
		clear(d.h[d.from:d.to])
	}
	d.from, d.to = len(d.h), 0
}

func (d *density) touch(from, to int) {
	if from < to {
		d.from, d.to = min(d.from, from), max(d.to, to)
	}
}

// leastFraction of a source's light is what a mirror must get to be drawn: what
// is left out of the tails of an exponential disc of ten mirrors' scale is 3e-5 of
// it, in frames and truth alike.
const leastFraction = 3e-9

// collect puts on d the light of emitters that the mirrors first..last of a row
// send on. keep, where not nil, chooses among them.
func (o *optics) collect(d *density, emitters []emitter, efficiency func(float64) float64, m *mirrorRow, first, last int, keep func(u int) bool) {
	d.clear()
	for u := first; u <= last; u++ {
		column, row, ok := o.field.mirror(u, m.w)
		if !ok || keep != nil && !keep(u) {
			continue
		}
		across := o.geometry.across(float64(u))
		for e := range emitters {
			if emitters[e].band == nil {
				continue
			}
			if emitters[e].sight != nil {
				o.addThrough(d, &emitters[e], m, column, row, across)
				continue
			}
			if p := emitters[e].image.fraction(float64(column), float64(row)); p > leastFraction {
				d.touch(emitters[e].band.add(d.h, p, m.start, across))
			}
		}
	}
	for i := d.from; i < d.to; i++ {
		d.h[i] *= m.stretch[i]
	}
	for u := first; u <= last; u++ {
		column, row, ok := o.field.mirror(u, m.w)
		if !ok || keep != nil && !keep(u) {
			continue
		}
		for e := range emitters {
			if len(emitters[e].lines) == 0 {
				continue
			}
			if emitters[e].sight != nil {
				o.addLinesThrough(d, &emitters[e], efficiency, m, column, row, u)
				continue
			}
			if p := emitters[e].image.fraction(float64(column), float64(row)); p > leastFraction {
				o.addLines(d, &emitters[e], efficiency, p, m, u)
			}
		}
	}
}

// addLines puts an emitter's lines on d.
func (o *optics) addLines(d *density, e *emitter, efficiency func(float64) float64, p float64, m *mirrorRow, u int) {
	factor := 1.0
	if e.motion != nil {
		factor = physics.DopplerFactor(e.motion.at(o.field.skyOf(u, m.w)))
	}
	across := o.geometry.across(float64(u))
	for _, line := range e.lines {
		nm := line.nm * factor
		o.addLine(d, nm, p*line.photons*efficiency(nm), line.fwhmKmS, across, m)
	}
}

// addLine puts a line of so many electrons per second on d.
func (o *optics) addLine(d *density, nm, rate, fwhmKmS, across float64, m *mirrorRow) {
	g := &o.geometry
	px := g.dispersed(nm)
	if !(rate > 0) || px < o.pxFrom || px > o.pxTo || g.dispersion(nm)*g.DispersionPxPerNM[0] <= 0 {
		return
	}
	x := g.land(across, px, m.row)
	width := fwhmKmS / fwhmPerSigma / (physics.LightSpeed_m_s / 1000) * nm * math.Abs(g.dispersion(nm))
	o.deposit(d, x, width, rate)
}

// Lines from sampledFrom px (standard deviation) up are sampled on the grid:
// the sum then errs by exp(-2 pi^2 (width/gridStep)^2), 1e-7. Narrower ones are
// made of points at the nodes of Gauss and Hermite's rule.
const sampledFrom = 0.45

// The nodes and weights of Gauss and Hermite's rule of 7 points for the unit
// normal (Abramowitz & Stegun, table 25.10, nodes times sqrt 2, weights over
// sqrt pi).
var (
	hermiteNodes   = [7]float64{-3.7504397177257425, -2.3667594107345416, -1.1544053947399682, 0, 1.1544053947399682, 2.3667594107345416, 3.7504397177257425}
	hermiteWeights = [7]float64{0.0005482688559722179, 0.030757123967586497, 0.24012317860501272, 0.45714285714285713, 0.24012317860501272, 0.030757123967586497, 0.0005482688559722179}
)

// deposit puts a line of a standard deviation in px, centred at x, on the grid.
func (o *optics) deposit(d *density, x, width, rate float64) {
	switch {
	case width == 0:
		o.depositPoint(d, x, rate)
	case width < sampledFrom:
		for i, node := range hermiteNodes {
			o.depositPoint(d, x+node*width, rate*hermiteWeights[i])
		}
	default:
		reach := reachSigmas * width
		from := max(int(math.Ceil((x-reach-o.axis.x0)*perPixel)), 0)
		to := min(int(math.Floor((x+reach-o.axis.x0)*perPixel))+1, o.axis.n)
		for i := from; i < to; i++ {
			d.h[i] += rate * bell(o.axis.at(i)-x, width)
		}
		d.touch(from, to)
	}
}

// depositPoint puts a point of light on lineNodes grid points. A point too near
// the axis' ends to be seen is left out.
func (o *optics) depositPoint(d *density, x, rate float64) {
	at := (x - o.axis.x0) * perPixel
	whole := math.Floor(at)
	first := int(whole) - (lineNodes/2 - 1)
	if first < 0 || first+lineNodes > o.axis.n {
		return
	}
	weights := pointWeights(at - whole)
	for k, w := range weights {
		d.h[first+k] += rate * perPixel * w
	}
	d.touch(first, first+lineNodes)
}
