package calib

import (
	"fmt"
	"math"
)

// Geometry maps light to detector pixels. Pixel centres are integers from 0. For
// element j, vacuum wavelength L and a trace row y0 (the detector row that the
// trace crosses at x = X_c), with l = L - L_c and q = y - Y_c,
//
//	x = X_c + X_e (j - J_c) + D1 l + D2 l^2 + D3 l^3 + SlitTilt q + Smile q^2
//	y = y0 + t(x),  t(x) = TraceTilt (x - X_c) + TraceCurve (x - X_c)^2.
//
// The two are coupled: y is the row the light really hits. Methods solve the
// coupling to better than 1e-9 px. X_e and D1 may be negative. A Geometry is plain
// numbers; copy it freely. Check it once before use.
type Geometry struct {
	X_c, Y_c   float64    // the reference pixel
	X_e        float64    // pixels per element along x
	J_c        float64    // the element at X_c, may be half an integer
	L_c        float64    // reference wavelength, vacuum nm
	D          [3]float64 // D1, D2, D3: px/nm, px/nm^2, px/nm^3
	SlitTilt   float64    // px per px
	Smile      float64    // px per px^2
	TraceTilt  float64    // px per px
	TraceCurve float64    // px per px^2
}

// Parameters points to the numbers of g in the order X_c, Y_c, X_e, J_c, L_c, D1, D2,
// D3, SlitTilt, Smile, TraceTilt, TraceCurve: for what writes and reads them.
func (g *Geometry) Parameters() []*float64 {
	return []*float64{&g.X_c, &g.Y_c, &g.X_e, &g.J_c, &g.L_c, &g.D[0], &g.D[1], &g.D[2],
		&g.SlitTilt, &g.Smile, &g.TraceTilt, &g.TraceCurve}
}

// couplingStep, in px, ends the solution of the coupling: each step leaves less than
// a hundredth of itself (see solveX), so that 1e-9 px are met.
const couplingStep = 1e-8

// maxSteps bounds every iteration; those of a checked Geometry need 2 to 5.
const maxSteps = 60

// TraceShift is t(x), the rows by which a trace has left its own row at x.
func (g *Geometry) TraceShift(x float64) float64 {
	s := x - g.X_c
	return s * (g.TraceTilt + g.TraceCurve*s)
}

// X is the detector column that wavelength L (vacuum nm) of element j reaches on
// trace row y0.
func (g *Geometry) X(j, y0, vacuumNm float64) float64 {
	unbent := g.unbent(j, vacuumNm)
	return g.solveX(unbent, y0, unbent)
}

// Wavelength inverts X: the vacuum wavelength in nm that element j puts at
// detector column x on trace row y0, on the branch of the dispersion that holds
// L_c. NaN where that branch does not reach x.
func (g *Geometry) Wavelength(x, j, y0 float64) float64 {
	l := g.invertDispersion(x - g.X_c - g.X_e*(j-g.J_c) - g.lean(x, y0))
	return g.L_c + l
}

// EdgesX fills dst with X(j, y0, L) at the wavelengths L = firstNm + i stepNm,
// i = 0..len(dst)-1: the edges of len(dst)-1 voxels. Rising or falling, as D1 and
// stepNm say. It returns dst.
func (g *Geometry) EdgesX(dst []float64, j, y0, firstNm, stepNm float64) []float64 {
	if len(dst) == 0 {
		return dst
	}
	// The guess continues the lean of the first edge in a straight line. It does not
	// look at the edge before, so that the processor solves several at once.
	start := g.unbent(j, firstNm)
	x := g.solveX(start, y0, start)
	lean, slope := x-start, g.leanSlope(x, y0)
	for i := range dst {
		unbent := g.unbent(j, firstNm+float64(i)*stepNm)
		dst[i] = g.solveX(unbent, y0, unbent+lean+slope*(unbent-start))
	}
	return dst
}

// EdgesXAt is EdgesX for edges at any vacuum wavelengths in nm, ascending or descending, of
// the same number as dst: those of a grid in air, of a logarithmic one, or of another
// standard of rest.
func (g *Geometry) EdgesXAt(dst []float64, j, y0 float64, vacuumNm []float64) []float64 {
	if len(vacuumNm) == 0 {
		return dst[:0]
	}
	start := g.unbent(j, vacuumNm[0])
	x := g.solveX(start, y0, start)
	lean, slope := x-start, g.leanSlope(x, y0)
	for i, nm := range vacuumNm {
		unbent := g.unbent(j, nm)
		dst[i] = g.solveX(unbent, y0, unbent+lean+slope*(unbent-start))
	}
	return dst
}

// Check refuses a geometry whose mapping cannot be inverted: a number that is not
// finite, a D1 of 0, a dispersion that turns between firstNm and lastNm, or a
// coupling of x and y, over columns 0..columns-1 and trace rows 0..rows-1, so
// strong that x does not grow along the unbent x.
func (g *Geometry) Check(columns, rows int, firstNm, lastNm float64) error {
	for _, p := range append(g.Parameters(), &firstNm, &lastNm) {
		if v := *p; math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("geometry: a parameter is not a finite number: %+v", *g)
		}
	}
	if g.D[0] == 0 {
		return fmt.Errorf("geometry: the dispersion d1 is 0 px/nm; give the real one")
	}
	low, high := g.branch()
	if a, b := min(firstNm, lastNm)-g.L_c, max(firstNm, lastNm)-g.L_c; a <= low || b >= high {
		return fmt.Errorf("geometry: the dispersion is monotonic from %.6g to %.6g nm only, not over %.6g to %.6g nm; check d1, d2, d3 or shorten the grid",
			g.L_c+low, g.L_c+high, min(firstNm, lastNm), max(firstNm, lastNm))
	}
	return g.checkCoupling(columns, rows)
}

// checkCoupling bounds the slope of the lean along x over the whole detector:
// it is d(lean)/dq, linear in q, times t'(x), linear in x, so the extremes of
// each bound the product.
func (g *Geometry) checkCoupling(columns, rows int) error {
	lastX, lastY := float64(columns-1), float64(rows-1)
	shift := max(math.Abs(g.TraceShift(0)), math.Abs(g.TraceShift(lastX)))
	if turn := g.X_c - g.TraceTilt/(2*g.TraceCurve); turn > 0 && turn < lastX {
		shift = max(shift, math.Abs(g.TraceShift(turn)))
	}
	leanSlope := math.Abs(g.SlitTilt) + 2*math.Abs(g.Smile)*(max(math.Abs(g.Y_c), math.Abs(lastY-g.Y_c))+shift)
	traceSlope := max(math.Abs(g.traceSlope(0)), math.Abs(g.traceSlope(lastX)))
	if s := leanSlope * traceSlope; s > 0.1 {
		return fmt.Errorf("geometry: the slit's lean (up to %.3g px/px) times the trace's slope (up to %.3g px/px) is above 0.1; check slit_tilt, smile, trace_tilt and trace_curve", leanSlope, traceSlope)
	}
	return nil
}

// unbent is x without slit tilt and smile.
func (g *Geometry) unbent(j, vacuumNm float64) float64 {
	return g.elementX(j) + g.disperse(vacuumNm-g.L_c)
}

// elementX is the unbent x of element j at the reference wavelength.
func (g *Geometry) elementX(j float64) float64 { return g.X_c + g.X_e*(j-g.J_c) }

func (g *Geometry) disperse(l float64) float64 {
	return l * (g.D[0] + l*(g.D[1]+l*g.D[2]))
}

func (g *Geometry) slope(l float64) float64 {
	return g.D[0] + l*(2*g.D[1]+l*3*g.D[2])
}

// lean is the shift of x by slit tilt and smile where trace row y0 crosses
// column x.
func (g *Geometry) lean(x, y0 float64) float64 {
	q := y0 - g.Y_c + g.TraceShift(x)
	return q * (g.SlitTilt + g.Smile*q)
}

// leanSlope is d(lean)/dx.
func (g *Geometry) leanSlope(x, y0 float64) float64 {
	q := y0 - g.Y_c + g.TraceShift(x)
	return (g.SlitTilt + 2*g.Smile*q) * g.traceSlope(x)
}

func (g *Geometry) traceSlope(x float64) float64 {
	return g.TraceTilt + 2*g.TraceCurve*(x-g.X_c)
}

// solveX solves x = unbent + lean(x, y0) from a first guess by Newton's method, its
// division by 1-s replaced by a product with 1+s. s, the slope of the lean along x,
// is below 0.1 (Check): a step leaves s^2, less than a hundredth, of itself.
func (g *Geometry) solveX(unbent, y0, guess float64) float64 {
	x := guess
	for range maxSteps {
		d := x - g.X_c
		q := y0 - g.Y_c + d*(g.TraceTilt+g.TraceCurve*d)
		miss := x - unbent - q*(g.SlitTilt+g.Smile*q)
		s := (g.SlitTilt + 2*g.Smile*q) * (g.TraceTilt + 2*g.TraceCurve*d)
		step := miss + miss*s
		x -= step
		if step < couplingStep && step > -couplingStep {
			break
		}
	}
	return x
}

// farNM is beyond any wavelength: a dispersion that turns so far away does not turn,
// and its turn cannot be computed.
const farNM = 1e9

// branch is the open interval of l around 0 on which the dispersion is
// monotonic.
func (g *Geometry) branch() (low, high float64) {
	low, high = math.Inf(-1), math.Inf(1)
	// Roots of D1 + 2 D2 l + 3 D3 l^2, in the form that does not cancel.
	a, halfB, c := 3*g.D[2], g.D[1], g.D[0]
	// In units of the larger term, so that no square underflows.
	unit := max(math.Abs(halfB), math.Sqrt(math.Abs(a))*math.Sqrt(math.Abs(c)))
	if unit == 0 {
		return low, high
	}
	disc := (halfB/unit)*(halfB/unit) - (a/unit)*(c/unit)
	if disc < 0 {
		return low, high
	}
	w := -(halfB + math.Copysign(unit*math.Sqrt(disc), halfB))
	for _, root := range []float64{w / a, c / w} {
		switch {
		case math.IsNaN(root) || math.Abs(root) > farNM:
		case root < 0:
			low = max(low, root)
		default:
			high = min(high, root)
		}
	}
	return low, high
}

// invertDispersion solves D1 l + D2 l^2 + D3 l^3 = d on the branch of l = 0: by
// Newton's method, by bisection where a step would leave the bracket.
func (g *Geometry) invertDispersion(d float64) float64 {
	low, high := g.bracket(d)
	if math.IsNaN(low) {
		return math.NaN()
	}
	rising := g.D[0] > 0
	l := d / g.D[0]
	for range maxSteps {
		if !(l > low && l < high) {
			l = low + (high-low)/2
		}
		miss := g.disperse(l) - d
		if miss == 0 {
			return l
		}
		if (miss > 0) == rising {
			high = l
		} else {
			low = l
		}
		next := l - miss/g.slope(l)
		if math.Abs(next-l) <= 1e-15*math.Abs(l) {
			return next
		}
		l = next
	}
	return l
}

// bracket is an interval of the branch of l = 0 whose ends lie on both sides of
// the solution of disperse(l) = d; NaN where there is none.
func (g *Geometry) bracket(d float64) (low, high float64) {
	low, high = g.branch()
	sign := math.Copysign(1, g.D[0])
	side := func(l float64) float64 { return sign * (g.disperse(l) - d) }
	// An end at infinity is replaced by one that is far enough.
	reach := 1 + math.Abs(d/g.D[0])
	if math.IsInf(low, 0) {
		for low = -reach; side(low) > 0; low *= 2 {
		}
	}
	if math.IsInf(high, 0) {
		for high = reach; side(high) < 0; high *= 2 {
		}
	}
	if !(side(low) <= 0 && side(high) >= 0) {
		return math.NaN(), math.NaN()
	}
	return low, high
}
