package report

import (
	"fmt"
	"html/template"
	"math"

	"mirrorloom/pipeline/product"
)

// largestDot is the radius of the largest mean residual.
const largestDot = 11.0

// drawArcPlaces draws the mean residual of the arc lines over elements and rows: a disc where
// lines fall at higher columns than fitted, a ring where at lower ones, as large as the
// residual; "" without arcs.
func drawArcPlaces(a *product.Arcs) template.HTML {
	if a == nil || len(a.ByPlace) == 0 {
		return ""
	}
	most := 0.0
	var elements, rows []float64
	for _, p := range a.ByPlace {
		most = max(most, math.Abs(p.MeanPx))
		elements = append(elements, float64(p.Element))
		rows = append(rows, float64(p.FirstRow), float64(p.LastRow))
	}
	if most == 0 {
		most = 1
	}
	x0, x1 := span(nil, elements)
	y0, y1 := span(nil, rows)
	c := newChart("Residuals of arc lines over elements and rows", "element", "detector row", x0, x1, y0, y1)
	c.axes()
	for _, p := range a.ByPlace {
		kind := "disc"
		if p.MeanPx < 0 {
			kind = "ring"
		}
		mark(&c.SVG, kind, c.x(float64(p.Element)), c.y(float64(p.FirstRow+p.LastRow)/2), max(0.6, largestDot/1.6*math.Sqrt(math.Abs(p.MeanPx)/most)))
	}
	y := c.bottom + chartBottom + 8
	for i, part := range []float64{1, -1} {
		kind, words := "disc", "+"
		if part < 0 {
			kind, words = "ring", "−"
		}
		x := c.left + 12 + float64(i)*170
		mark(&c.SVG, kind, x, y, largestDot/1.6)
		c.Text("start", x+14, y+4, fmt.Sprintf("%s%.2g px", words, most))
	}
	c.height = y + 16
	return c.done()
}

// drawArcLines draws the mean residual of each line and its scatter; "" without arcs.
func drawArcLines(a *product.Arcs) template.HTML {
	if a == nil || len(a.ByLine) == 0 {
		return ""
	}
	var nm, ends []float64
	for _, l := range a.ByLine {
		sigma := scatterPx(l.Residual)
		nm, ends = append(nm, l.WavelengthNM), append(ends, l.MeanPx-sigma, l.MeanPx+sigma)
	}
	x0, x1 := span(nil, nm)
	low, high := span([]float64{0}, ends)
	c := newChart("Residuals of arc lines over wavelength", "vacuum wavelength, nm", "measured less fitted, px", x0, x1, low, high)
	c.axes()
	c.level(0)
	for _, l := range a.ByLine {
		c.errorBar("error", l.WavelengthNM, l.MeanPx, scatterPx(l.Residual))
		mark(&c.SVG, "disc", c.x(l.WavelengthNM), c.y(l.MeanPx), 2.5)
	}
	return c.done()
}

// arcWords describe the residuals.
func arcWords(a *product.Arcs) string {
	return fmt.Sprintf("%d centroids, rms %.4f px; the solution is known to %.4f px at worst.", a.Lines, a.RMSPx, a.WorstErrorPx)
}

// scatterPx is the standard deviation of residuals about their mean.
func scatterPx(r product.Residual) float64 {
	return math.Sqrt(max(0, r.RMSPx*r.RMSPx-r.MeanPx*r.MeanPx))
}
