package calib

import "math"

// RowPlaces gives Geometry.X for many elements and wavelengths of one trace row. On a row x
// depends on the unbent x alone, and smoothly: X is solved at nodes, and between them taken
// from the cubic through the values and slopes of two nodes, which errs by less than 1e-7 px
// (h^4/384 times the fourth derivative of the lean, at most a few 24 Smile TraceCurve^2; h is
// the nodes' distance). One goroutine at a time uses it.
type RowPlaces struct {
	geometry  Geometry
	dispersed []float64 // of each wavelength, in units of the nodes' distance
	first     float64   // unbent x of the first node
	y0        float64
	ready     bool
	pieces    [][4]float64 // x by powers of the place between two nodes
}

// nodeDistance, px: see RowPlaces.
const nodeDistance = 16

// NewRowPlaces is for elements 0..elements-1 and the wavelengths w. Call SetRow before use.
func NewRowPlaces(g Geometry, elements int, w Wavelengths) *RowPlaces {
	p := &RowPlaces{geometry: g, dispersed: make([]float64, w.count)}
	low, high := math.Inf(1), math.Inf(-1)
	for i := range p.dispersed {
		d := g.disperse(w.at(i) - g.L_c)
		low, high = min(low, d), max(high, d)
		p.dispersed[i] = d / nodeDistance
	}
	ends := [2]float64{g.elementX(0), g.elementX(float64(elements - 1))}
	p.first = min(ends[0], ends[1]) + low
	// One more for the rounding of the last place.
	nodes := 2 + int((max(ends[0], ends[1])+high-p.first)/nodeDistance)
	p.pieces = make([][4]float64, nodes)
	return p
}

// SetRow turns to trace row y0.
func (p *RowPlaces) SetRow(y0 float64) {
	if p.ready && p.y0 == y0 {
		return
	}
	p.y0, p.ready = y0, true
	g := &p.geometry
	guess, before, slopeBefore := p.first, 0.0, 0.0
	for i := range len(p.pieces) + 1 {
		unbent := p.first + float64(i)*nodeDistance
		x := g.solveX(unbent, y0, guess)
		// dx/d(unbent) = 1/(1-s), s the slope of the lean along x.
		slope := nodeDistance / (1 - g.leanSlope(x, y0))
		if i > 0 {
			rise := x - before
			p.pieces[i-1] = [4]float64{before, slopeBefore, 3*rise - 2*slopeBefore - slope, slopeBefore + slope - 2*rise}
		}
		guess, before, slopeBefore = x+slope, x, slope
	}
}

// Places fills dst with the columns that the wavelengths of element j reach: what
// Geometry.Places gives. It returns dst, as long as the list of wavelengths.
func (p *RowPlaces) Places(dst []float64, j float64) []float64 {
	dst = dst[:len(p.dispersed)]
	start := (p.geometry.elementX(j) - p.first) / nodeDistance
	pieces := p.pieces
	for i, d := range p.dispersed {
		at := start + d
		n := int(at)
		if uint(n) >= uint(len(pieces)) {
			n = min(max(n, 0), len(pieces)-1)
		}
		c := &pieces[n]
		f := at - float64(n)
		dst[i] = c[0] + f*(c[1]+f*(c[2]+f*c[3]))
	}
	return dst
}
