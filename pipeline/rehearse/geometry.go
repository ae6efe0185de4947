package rehearse

import (
	"math"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Geometry is where light of the mirrors truly lands: the equations of the
// package's documentation. truth/geometry.yaml holds one.
type Geometry struct {
	// CenterNM is L_c, vacuum nm.
	CenterNM float64 `yaml:"center_nm"`
	// DispersionPxPerNM holds d1, d2, d3 in px/nm, px/nm^2, px/nm^3.
	DispersionPxPerNM [3]float64 `yaml:"dispersion_px_per_nm,flow"`
	// UStepPx and WStepPx are u_step and w_step, px.
	UStepPx float64 `yaml:"u_step_px"`
	WStepPx float64 `yaml:"w_step_px"`
	// UMiddle is u_mid, the u whose light lands on x_c, WMiddle is r_c, in mirrors.
	UMiddle float64 `yaml:"u_middle"`
	WMiddle float64 `yaml:"w_middle"`
	// XCenterPx and YCenterPx are x_c and y_c, in active pixels from 0.
	XCenterPx float64 `yaml:"x_center_px"`
	YCenterPx float64 `yaml:"y_center_px"`
	// SlitTilt and SmilePerPx make slant, px/px and px/px^2.
	SlitTilt   float64 `yaml:"slit_tilt"`
	SmilePerPx float64 `yaml:"smile_per_px"`
	// TraceTilt and TraceCurvePerPx make trace, px/px and px/px^2.
	TraceTilt       float64 `yaml:"trace_tilt"`
	TraceCurvePerPx float64 `yaml:"trace_curve_per_px"`
	// LSFFWHMPx is the full width at half maximum of a mirror's spot, px.
	LSFFWHMPx float64 `yaml:"lsf_fwhm_px"`
}

// nominalGeometry is the profile's geometry for a sequence's strips.
func nominalGeometry(seq *sequence.Sequence) Geometry {
	s := seq.Profile.Spectrograph
	return Geometry{
		CenterNM: s.CenterNM, DispersionPxPerNM: s.DispersionPxPerNM,
		UStepPx: s.UStepPx, WStepPx: s.WStepPx,
		UMiddle: middleU(seq), WMiddle: seq.Profile.WCenter(),
		XCenterPx: s.XCenterPx, YCenterPx: s.YCenterPx,
		SlitTilt: s.SlitTilt, SmilePerPx: s.SmilePerPx,
		TraceTilt: s.TraceTilt, TraceCurvePerPx: s.TraceCurvePerPx,
		LSFFWHMPx: s.LSFFWHMPx,
	}
}

// middleU is the u whose light lands on x_c: the middle of the strips or, where they lie so
// many whole mirrors beside the device's, the place as many mirrors back. (Half a mirror, by
// which strips of an odd number of mirrors miss the middle of an even number, is no offset.)
func middleU(seq *sequence.Sequence) float64 {
	middle := seq.FieldCenterU()
	return middle - math.Floor(middle-seq.Profile.UCenter())
}

// How far the true geometry may be from the profile's.
const (
	offsetXPx        = 15.0  // of the light along x
	offsetDispersion = 0.02  // relative
	offsetSmilePx    = 3.0   // at the first and last row
	offsetSlitDeg    = 1.0   // of the slit's image
	offsetTracePx    = 5.0   // end to end
	offsetStep       = 0.001 // relative, of u_step
	largestTracePx   = 8.0   // end to end, all in all (the profile's own limit)
)

// offsetGeometry moves a geometry by seeded amounts, each uniform up to the
// constants above. Rows are not moved: mirror row r_c stays on row y_c at the
// profile's x_c, since no frame of a night shows where a mirror row lies.
func offsetGeometry(g Geometry, d instrument.Detector, seed uint64) Geometry {
	pcg := newStream(seed, "geometry", 0, 0)
	t := g
	t.XCenterPx += within(pcg, offsetXPx)
	scale := 1 + within(pcg, offsetDispersion)
	for i := range t.DispersionPxPerNM {
		t.DispersionPxPerNM[i] *= scale
	}
	half := float64(d.Rows) / 2
	t.SmilePerPx += within(pcg, offsetSmilePx) / (half * half)
	t.SlitTilt += math.Tan(within(pcg, offsetSlitDeg) * math.Pi / 180)
	t.TraceTilt += within(pcg, offsetTracePx) / float64(max(d.Columns-1, 1))
	t.UStepPx *= 1 + within(pcg, offsetStep)
	if end := t.traceRange(d.Columns); end > largestTracePx {
		t.TraceTilt *= largestTracePx / end
		t.TraceCurvePerPx *= largestTracePx / end
	}
	t.YCenterPx -= t.trace(g.XCenterPx)
	return t
}

// traceRange is how far the trace leaves its row, px, over the columns.
func (g *Geometry) traceRange(columns int) float64 {
	low, high := g.traceBounds(-0.5, float64(columns)-0.5)
	return high - low
}

// traceBounds are the least and the largest trace shift from x0 to x1.
func (g *Geometry) traceBounds(x0, x1 float64) (low, high float64) {
	a, b := g.trace(x0), g.trace(x1)
	low, high = math.Min(a, b), math.Max(a, b)
	if g.TraceCurvePerPx != 0 {
		if turn := g.XCenterPx - g.TraceTilt/(2*g.TraceCurvePerPx); turn > x0 && turn < x1 {
			low, high = math.Min(low, g.trace(turn)), math.Max(high, g.trace(turn))
		}
	}
	return low, high
}

// trace is the shift in y of all spectra at column x.
func (g *Geometry) trace(x float64) float64 {
	d := x - g.XCenterPx
	return d * (g.TraceTilt + g.TraceCurvePerPx*d)
}

// traceSlope is the derivative of trace.
func (g *Geometry) traceSlope(x float64) float64 {
	return g.TraceTilt + 2*g.TraceCurvePerPx*(x-g.XCenterPx)
}

// slant is the shift in x at row y.
func (g *Geometry) slant(y float64) float64 {
	q := y - g.YCenterPx
	return q * (g.SlitTilt + g.SmilePerPx*q)
}

// slantSlope is the derivative of slant.
func (g *Geometry) slantSlope(y float64) float64 {
	return g.SlitTilt + 2*g.SmilePerPx*(y-g.YCenterPx)
}

// dispersed is d1 l + d2 l^2 + d3 l^3 at a wavelength, px.
func (g *Geometry) dispersed(nm float64) float64 {
	d, l := g.DispersionPxPerNM, nm-g.CenterNM
	return l * (d[0] + l*(d[1]+l*d[2]))
}

// dispersion is the derivative of dispersed, px/nm.
func (g *Geometry) dispersion(nm float64) float64 {
	d, l := g.DispersionPxPerNM, nm-g.CenterNM
	return d[0] + l*(2*d[1]+l*3*d[2])
}

// row is the detector row of mirror row w where the trace shift is 0.
func (g *Geometry) row(w int) float64 {
	return g.YCenterPx + g.WStepPx*(float64(w)-g.WMiddle)
}

// across is the shift in x of mirrors of u against the middle, px.
func (g *Geometry) across(u float64) float64 { return g.UStepPx * (u - g.UMiddle) }

// landPasses is how often slant and trace are put into each other. A pass gains
// the product of their slopes, below 0.005; the first is off by less than 0.03
// px, so that five leave less than 1e-10.
const landPasses = 5

// land solves for the column X of light dispersed by px that leaves a mirror
// row at detector row `row` (see row) with shift `across`: X and Y depend on
// each other through slant and trace, by their slopes' product a pass (below
// 0.01), so that eight passes reach the last digits.
func (g *Geometry) land(across, px, row float64) float64 {
	x0 := g.XCenterPx + across + px
	x := x0
	for range landPasses {
		x = x0 + g.slant(row+g.trace(x))
	}
	return x
}

// onTrace solves for the column x at which a point that stays `row` rows
// (detector row without trace shift) has the straightened column xi =
// x - slant: the inverse mapping of a voxel's edge.
func (g *Geometry) onTrace(xi, row float64) float64 {
	x := xi
	for range landPasses {
		x = xi + g.slant(row+g.trace(x))
	}
	return x
}

// wavelength inverts dispersed by Newton's method; ok is false where the
// polynomial does not reach px, or turns back before it.
func (g *Geometry) wavelength(px float64) (nm float64, ok bool) {
	l := px / g.DispersionPxPerNM[0]
	for range 60 {
		nm = g.CenterNM + l
		slope := g.dispersion(nm)
		if slope*g.DispersionPxPerNM[0] <= 0 {
			return nm, false
		}
		step := (px - g.dispersed(nm)) / slope
		l += step
		if math.Abs(step) < 1e-11*(1+math.Abs(l)) {
			nm = g.CenterNM + l
			return nm, nm > 0 && g.dispersion(nm)*g.DispersionPxPerNM[0] > 0
		}
	}
	return nm, false
}

// YAML is the geometry as text.
func (g *Geometry) YAML() ([]byte, error) { return config.Encode(g) }

// ReadGeometry reads a truth/geometry.yaml.
func ReadGeometry(name string, data []byte) (*Geometry, error) {
	g := new(Geometry)
	if err := config.Decode(name, data, g); err != nil {
		return nil, err
	}
	return g, nil
}
