package calib

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// colourScaleNM keeps the powers of l near 1.
const colourScaleNM = 100

// endElements is how many elements at an end of the field are averaged for the light
// of mirrors beyond it.
const endElements = 4

// curveScaleE keeps Q near the size of the light.
const curveScaleE = 1e5

// AddRow adds detector row y: the term T with its variance, flags (pixels with any
// are left out; nil for none), and light[j], the light of element j in that row, of
// the same exposure time as T: the decoded coded flat. A row without light fixes
// nothing.
//
// Weights are 1/variance averaged over the pixels around: a variance taken from T
// itself is small where noise made T small, and would draw the fit down (0.4 e of 3 e
// rms in a dark frame).
func (f *ColourFit) AddRow(y int, term, variance []float32, flags []Flag, light [][]float32) {
	r := f.regressors(y, light)
	use, clipped := usablePixels(f.rule.Clip, term, variance, flags, r[0])
	f.clips += clipped
	weights := smoothWeights(variance, use)
	terms := f.terms()
	for x, ok := range use {
		if !ok {
			continue
		}
		w := weights[x]
		t := float64(term[x])
		f.square += w * t * t
		f.light += r[0][x] * r[0][x] * w
		f.pixels++
		for a := range terms {
			wa := w * r[a][x]
			f.right[a] += wa * t
			for b := range terms {
				f.normal[a][b] += wa * r[b][x]
			}
		}
	}
}

// smoothWeights are 1/variance, averaged over the pixels in use within weightReach.
func smoothWeights(variance []float32, use []bool) []float64 {
	const weightReach = 15
	sum, count := make([]float64, len(use)+1), make([]float64, len(use)+1)
	for x, ok := range use {
		sum[x+1], count[x+1] = sum[x], count[x]
		if ok {
			sum[x+1] += float64(variance[x])
			count[x+1]++
		}
	}
	weights := make([]float64, len(use))
	for x, ok := range use {
		if first, last := max(0, x-weightReach), min(len(use), x+weightReach+1); ok {
			weights[x] = (count[last] - count[first]) / (sum[last] - sum[first])
		}
	}
	return weights
}

// terms is the number of unknowns: the colour's and the curve.
func (f *ColourFit) terms() int {
	n := f.rule.Degree + 1
	if f.rule.Curve {
		n++
	}
	return n
}

// regressors are, by unknown, the sums over the elements in each pixel of a row.
func (f *ColourFit) regressors(y int, light [][]float32) [][]float64 {
	r := make([][]float64, f.terms())
	for a := range r {
		r[a] = make([]float64, f.columns)
	}
	for j := range f.elements {
		weight := 1.0
		if f.rule.Weights != nil {
			weight = f.rule.Weights[j]
		}
		f.addElement(r, y, float64(j), weight, light[j])
	}
	if f.rule.Curve {
		addCurve(r[f.terms()-1], light)
	}
	return r
}

// addCurve is -Q.
func addCurve(dst []float64, light [][]float32) {
	parity := [2][]float64{make([]float64, len(dst)), make([]float64, len(dst))}
	for j, row := range light {
		sum := parity[j%2]
		for x, v := range row {
			sum[x] += float64(v)
		}
	}
	for x, even := range parity[0] {
		dst[x] = -2 * even * parity[1][x] / curveScaleE
	}
}

// addElement adds weight f l^k of an element at place j in the field.
func (f *ColourFit) addElement(r [][]float64, y int, j, weight float64, light []float32) {
	start := f.table.start(&f.geometry, float64(y), j)
	for x, v := range light {
		l, ok := f.table.at(start + float64(x))
		if !ok || v == 0 {
			continue
		}
		value := weight * float64(v)
		for k := 0; k <= f.rule.Degree; k++ {
			r[k][x] += value
			value *= l
		}
	}
}

// addShifted adds weight src(x + shift) to dst, linearly interpolated.
func addShifted(dst, src []float32, shift, weight float64) {
	whole := math.Floor(shift)
	part := float32(shift - whole)
	w := float32(weight)
	for x := range dst {
		at := x + int(whole)
		if at >= 0 && at+1 < len(src) {
			dst[x] += w * (src[at]*(1-part) + src[at+1]*part)
		}
	}
}

// usablePixels tells which pixels of a row take part, and how many are left out as
// deviant: those without flags whose deviation from the row's own level, T = D times
// the light, is within clip sigmas (no limit where clip is 0).
func usablePixels(clip float64, term, variance []float32, flags []Flag, light []float64) (use []bool, clipped int) {
	use = make([]bool, len(term))
	for x := range use {
		use[x] = (flags == nil || flags[x] == 0) && variance[x] > 0 && term[x] == term[x]
	}
	if clip <= 0 {
		return use, 0
	}
	miss, scratch := make([]float32, len(term)), make([]float32, len(term))
	for range 3 {
		var top, bottom float64
		for x, ok := range use {
			if ok {
				top += float64(term[x]) * light[x]
				bottom += light[x] * light[x]
			}
		}
		ratio := 0.0
		if bottom > 0 {
			ratio = top / bottom
		}
		for x := range miss {
			miss[x] = float32(math.NaN())
			if use[x] {
				miss[x] = term[x] - float32(ratio*light[x])
			}
		}
		level, scatter := RobustLevel(miss, scratch)
		for x, ok := range use {
			limit := clip * max(scatter, math.Sqrt(float64(variance[x])))
			if ok && !(math.Abs(float64(miss[x])-level) <= limit) {
				use[x] = false
				clipped++
			}
		}
	}
	return use, clipped
}

// Solve gives the term; an error wrapping ErrNoLight where the rows do not fix it.
func (f *ColourFit) Solve() (*ColourTerm, error) {
	n := f.terms()
	if f.pixels <= n || !(f.light > 0) {
		return nil, fmt.Errorf("colour fit: %w: %d pixels", ErrNoLight, f.pixels)
	}
	normal := mat.NewSymDense(n, nil)
	for a := range n {
		for b := a; b < n; b++ {
			normal.SetSym(a, b, f.normal[a][b])
		}
	}
	var factor mat.Cholesky
	if !factor.Factorize(normal) || factor.Cond() > 1e13 {
		return nil, fmt.Errorf("colour fit: %w: %d pixels do not fix %d coefficients", ErrNoLight, f.pixels, n)
	}
	var solution mat.VecDense
	var inverse mat.SymDense
	if err := factor.SolveVecTo(&solution, mat.NewVecDense(n, f.right[:n])); err != nil {
		return nil, fmt.Errorf("colour fit: %w", err)
	}
	if err := factor.InverseTo(&inverse); err != nil {
		return nil, fmt.Errorf("colour fit: %w", err)
	}
	return f.term(&solution, &inverse), nil
}

// term takes the solution out of its scales.
func (f *ColourFit) term(solution *mat.VecDense, inverse *mat.SymDense) *ColourTerm {
	n, powers := f.terms(), f.rule.Degree+1
	explained := 0.0
	for a := range n {
		explained += solution.AtVec(a) * f.right[a]
	}
	out := &ColourTerm{CenterNM: f.geometry.L_c, Pixels: f.pixels, Clipped: f.clips, Covariance: mat.NewSymDense(powers, nil)}
	out.Chi2 = (f.square - explained) / float64(f.pixels-n)
	widen := max(1, out.Chi2)
	for a := range powers {
		scale := math.Pow(colourScaleNM, -float64(a))
		out.Coef = append(out.Coef, solution.AtVec(a)*scale)
		for b := a; b < powers; b++ {
			out.Covariance.SetSym(a, b, inverse.At(a, b)*widen*scale*math.Pow(colourScaleNM, -float64(b)))
		}
	}
	if f.rule.Curve {
		out.Curve = solution.AtVec(n-1) / curveScaleE
		out.CurveError = math.Sqrt(inverse.At(n-1, n-1)*widen) / curveScaleE
	}
	return out
}

// dispersed tabulates l/colourScaleNM by the distance along x that it is dispersed,
// every pixel; linear between, which errs by the dispersion's curvature over a
// pixel, some 1e-5 nm.
type dispersed struct {
	first int
	l     []float64
}

func newDispersed(g *Geometry, elements, columns int) *dispersed {
	// Far enough for every element, those beyond the field, a field beside X_c, and the
	// slit's lean.
	reach := columns + int(math.Abs(g.X_e)*(float64(elements)*2+math.Abs(g.J_c-float64(elements-1)/2))) + 64
	d := &dispersed{first: -reach, l: make([]float64, 2*reach+1)}
	for i := range d.l {
		d.l[i] = g.invertDispersion(float64(i-reach)) / colourScaleNM
	}
	return d
}

// start is the distance of detector row y at x = 0 for the element at place j.
func (d *dispersed) start(g *Geometry, y, j float64) float64 {
	q := y - g.Y_c
	return -g.X_c - g.X_e*(j-g.J_c) - q*(g.SlitTilt+g.Smile*q)
}

// at is l at a distance; false where no wavelength is dispersed so far.
func (d *dispersed) at(distance float64) (l float64, ok bool) {
	p := distance - float64(d.first)
	i := int(p)
	if p < 0 || i+1 >= len(d.l) {
		return 0, false
	}
	l = d.l[i] + (d.l[i+1]-d.l[i])*(p-float64(i))
	return l, l == l
}
