package reduce

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// dispersionTerms is the number of coefficients of a row of DISPERSION.
const dispersionTerms = 8

// dispersionTable writes wavelength as a polynomial of the detector column for
// every element and every detector row that mirrors feed:
//
//	vacuum nm = sum over i of COEF[i] t^i,  t = (x - XREF)/XSCALE,
//
// x counted from 0. The coefficients pass the geometry's own wavelengths at the
// Chebyshev points of the detector's width, which leaves less than 1e-5 px for
// any dispersion of a sound instrument. RMS_PX is the rms of the arc lines
// around the solution and NLINES their number: not a number and 0 for the
// profile's own dispersion.
func dispersionTable(g calib.Geometry, arcs *calib.ArcSolution, u *usage, columns int) (*fitsutil.Table, error) {
	fit := newPolynomial(columns)
	var element, row, lines []int32
	var rms, coef []float64
	for y := range u.rows {
		for j, f := range u.row(y) {
			if f&product.FlagNoData != 0 && f&product.FlagSentinel == 0 {
				continue
			}
			used, scatter := 0, math.NaN()
			if arcs != nil {
				if n, _, r := arcs.LinesAt(j, y); n > 0 {
					used, scatter = n, r
				}
			}
			element, row, lines = append(element, int32(j)), append(row, int32(y)), append(lines, int32(used))
			rms = append(rms, scatter)
			coef = fit.append(coef, func(x float64) float64 { return g.Wavelength(x, float64(j), float64(y)) })
		}
	}
	t := &fitsutil.Table{Name: product.Dispersion, Header: fitsutil.NewHeader(), Columns: []fitsutil.Column{
		{Name: "ELEMENT", Format: "J", Data: element},
		{Name: "ROW", Format: "J", Data: row},
		{Name: "COEF", Format: "8D", Unit: "nm", Data: coef},
		{Name: "RMS_PX", Format: "D", Unit: "pixel", Data: rms},
		{Name: "NLINES", Format: "J", Data: lines},
	}}
	for _, c := range []fitsutil.Card{
		{Key: "XREF", Value: fit.middle, Comment: "t = (x - XREF)/XSCALE, x from 0"},
		{Key: "XSCALE", Value: fit.half, Comment: "COEF[i] multiplies t^i"},
	} {
		if err := t.Header.Set(c.Key, c.Value, c.Comment); err != nil {
			return nil, err
		}
	}
	return t, product.SetGeometry(t.Header, g.Parameters())
}

// polynomial passes a polynomial through a function's values at Chebyshev
// points over the detector's columns.
type polynomial struct {
	middle, half float64
	points       [dispersionTerms]float64 // x
	inverse      mat.Dense                // values at the points to coefficients of t
}

func newPolynomial(columns int) *polynomial {
	p := &polynomial{middle: float64(columns-1) / 2, half: float64(columns) / 2}
	powers := mat.NewDense(dispersionTerms, dispersionTerms, nil)
	for i := range p.points {
		t := math.Cos(math.Pi * (float64(i) + 0.5) / dispersionTerms)
		p.points[i] = p.middle + p.half*t
		for k := range dispersionTerms {
			powers.Set(i, k, math.Pow(t, float64(k)))
		}
	}
	if err := p.inverse.Inverse(powers); err != nil {
		panic("internal error: Chebyshev points are distinct: " + err.Error())
	}
	return p
}

func (p *polynomial) append(coef []float64, f func(x float64) float64) []float64 {
	var values [dispersionTerms]float64
	for i, x := range p.points {
		values[i] = f(x)
	}
	for k := range dispersionTerms {
		sum := 0.0
		for i, v := range values {
			sum += p.inverse.At(k, i) * v
		}
		coef = append(coef, sum)
	}
	return coef
}
