package reduce

import (
	"math"
	"reflect"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// calibration sums up what was measured of the instrument; nil if nothing was.
func (r *reduction) calibration() *product.Calibration {
	c := r.report
	if a := r.optics.arcs; a != nil {
		c.Arcs = r.arcSummary(a)
	}
	if t := r.optics.trace; t != nil {
		c.Trace = &product.Trace{Tilt: t.TraceTilt, Curve: t.TraceCurve, RMSPx: t.RMSPx, Ends: t.Used}
		if !math.IsNaN(t.OffsetPx) {
			c.Trace.OffsetPx = &product.Measured{Value: t.OffsetPx, Error: t.OffsetErr}
		}
	}
	if r.optics.pixel != nil && r.optics.response != nil {
		c.Flat = r.flatSummary()
	}
	if d := r.optics.neighbour; d != nil {
		c.Neighbour = r.sampled(d.At)
	}
	if e := r.optics.leak; e != nil && e.Significance(r.optics.geometry.L_c) > neighbourSigmas {
		c.Contrast = r.sampled(e.Contrast)
	}
	if remarks := r.remarks(); len(remarks) > 0 {
		c.Remarks = remarks
	}
	if reflect.DeepEqual(c, product.Calibration{}) {
		return nil
	}
	return &c
}

// sampled gives a function of the wavelength at five places of the band.
func (r *reduction) sampled(f func(nm float64) (value, err float64)) []product.AtNM {
	const places = 5
	axis := r.schema.Axis()
	var all []product.AtNM
	for i := range places {
		nm := axis.ObservedNM(float64(axis.Grid.Count-1) * float64(i) / (places - 1))
		if v, err := f(nm); !math.IsNaN(v) && !math.IsInf(v, 0) {
			all = append(all, product.AtNM{WavelengthNM: nm, Value: v, Error: err})
		}
	}
	return all
}

func (r *reduction) arcSummary(a *calib.ArcSolution) *product.Arcs {
	nominal := nominalGeometry(r.seq)
	g := r.optics.geometry
	j, y := float64(r.seq.N()-1)/2, nominal.Y_c
	return &product.Arcs{
		Lines: a.Used, Rejected: a.Rejected, RMSPx: a.RMSPx, WorstErrorPx: r.worstError(a),
		ShiftPx:         g.X(j, y, g.L_c) - nominal.X(j, y, g.L_c),
		DispersionRatio: g.D[0] / nominal.D[0],
		ByPlace:         arcPlaces(a.Residuals), ByLine: arcLineResiduals(a.Residuals),
		WidthPx: r.sampled(func(nm float64) (float64, float64) { return a.Width.FWHMPx(nm), 0 }),
	}
}

// worstError is the largest standard error of the wavelength solution over the
// cube, px: it is a smooth function, largest at some corner or end.
func (r *reduction) worstError(a *calib.ArcSolution) float64 {
	axis, n := r.schema.Axis(), r.seq.N()
	worst := 0.0
	for _, j := range []int{0, n / 2, n - 1} {
		first, last := r.litRows(j)
		if first > last {
			continue
		}
		for _, y := range []int{first, (first + last) / 2, last} {
			for l := 0; l <= 8; l++ {
				nm := axis.ObservedNM(float64(axis.Grid.Count-1) * float64(l) / 8)
				worst = max(worst, a.ErrorPx(float64(j), float64(y), nm))
			}
		}
	}
	return worst
}

func (r *reduction) flatSummary() *product.Flat {
	p, s := r.optics.pixel, r.optics.response
	f := &product.Flat{PixelRMS: p.Scatter, SlitRMS: rms(s.Slit), EfficiencyRMS: rms(s.Band), PeriodVoxels: s.Period, LowPixels: p.Low}
	if r.rectifier != nil { // voxels were made
		f.AddedVariance = r.rectifier.addedVariance()
	}
	return f
}

// rms is the scatter of factors around their mean.
func rms(x []float32) float64 {
	var sum, square float64
	for _, v := range x {
		sum += float64(v)
		square += float64(v) * float64(v)
	}
	n := float64(max(len(x), 1))
	return math.Sqrt(max(0, square/n-sum/n*sum/n))
}
