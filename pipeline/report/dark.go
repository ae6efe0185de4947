package report

import (
	"fmt"
	"html/template"
	"math"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/product"
)

// drawStepChi2 draws the chi-square of each science step's part in the dark columns; ""
// where it was not measured.
func drawStepChi2(steps []product.StepChi2) template.HTML {
	var x, y []float64
	for _, s := range steps {
		if s.Chi2 != nil && *s.Chi2 > 0 {
			x, y = append(x, float64(s.Step)), append(y, *s.Chi2)
		}
	}
	if len(x) == 0 {
		return ""
	}
	low, high := span([]float64{0.5, 1.5}, y)
	c := newChart("Chi-square of dark columns by science step", "science step", "chi-square", x[0], x[len(x)-1], max(low, 0), high)
	if high > 10 {
		c.y0, c.y1 = 0.5*math.Min(1, low+0.5), high*1.5
		c.y0 = max(c.y0, 0.1)
		c.logY()
	}
	c.axes()
	c.level(1)
	for i := range x {
		mark(&c.SVG, "disc", c.x(x[i]), c.y(max(y[i], c.y0)), 2)
	}
	return c.done()
}

// drawHeldOut draws the chi-square of dark columns that a correction's fit has not seen,
// before it as a ring and after it as a disc; "" without any correction tried.
func drawHeldOut(t *product.Throughput, final *float64) template.HTML {
	if t == nil || len(t.HeldOut) == 0 {
		return ""
	}
	ends := []float64{0.95, 1.05}
	for _, h := range t.HeldOut {
		ends = append(ends, h.Before, h.After)
	}
	rows := t.HeldOut
	if final != nil {
		ends = append(ends, *final)
	}
	low, high := span(nil, ends)
	c := newChart("Held-out chi-square of dark columns", "chi-square of dark columns that the fit has not seen", "", low, high, 0, 1)
	c.yTick, c.left = nil, 20
	c.bottom = chartTop + 40*float64(len(rows)+1)
	if low > 0 && high > 10 {
		c.logX()
	}
	c.axes()
	c.Line("due", c.x(1), chartTop, c.x(1), c.bottom)
	line := func(i int, words string, values ...float64) {
		y := chartTop + 40*float64(i) + 26
		c.Text("start", c.left+6, y-10, words)
		c.Line("error", c.x(values[0]), y, c.x(values[len(values)-1]), y)
		for k, v := range values {
			kind := "ring"
			if k == len(values)-1 {
				kind = "disc"
			}
			mark(&c.SVG, kind, c.x(v), y, 4.5)
		}
	}
	for i, h := range rows {
		kept := ", not kept"
		if h.Kept {
			kept = ", kept"
		}
		line(i, h.Step+kept, h.Before, h.After)
	}
	if final != nil {
		line(len(rows), "the cube", *final)
	}
	c.height = c.bottom + chartBottom
	return c.done()
}

// drawPulls draws how often dark columns decode to so many standard deviations, against the
// Gaussian that is due; "" without any.
func drawPulls(d *product.DarkPulls) template.HTML {
	if d == nil || d.Number() == 0 {
		return ""
	}
	n, bins := float64(d.Number()), len(d.Counts)
	most := 0.0
	for i, k := range d.Counts {
		most = max(most, float64(k)/n, d.Expected(i)/n)
	}
	first, last := d.FirstSigma, d.FirstSigma+float64(bins)*d.StepSigma
	c := newChart("Pulls of dark columns", "decode of a dark column / its standard deviation", "part of all", first, last, 0, 1.08*most)
	c.axes()
	for i, k := range d.Counts {
		x, part := first+float64(i)*d.StepSigma, float64(k)/n
		if k > 0 {
			c.Rect("bar-fill", c.x(x), c.y(part), c.x(x+d.StepSigma)-c.x(x), c.bottom-c.y(part))
		}
	}
	var x, y []float64
	for i := range bins {
		x, y = append(x, first+(float64(i)+0.5)*d.StepSigma), append(y, d.Expected(i)/n)
	}
	c.path("due-line", x, y, d.StepSigma)
	return c.done()
}

// pullWords say how far pulls agree with the Gaussian.
func pullWords(d *product.DarkPulls) string {
	if d == nil || d.Number() == 0 {
		return ""
	}
	beyond2, due2 := d.Beyond(2)
	beyond4, due4 := d.Beyond(4)
	n := float64(d.Number())
	return fmt.Sprintf("%d decodes of sampled pixels (bars) and what noise alone gives (line). Beyond 2 standard deviations lie %s where %s are due, beyond 4 lie %.0f where %.0f are due.",
		d.Number(), percent(beyond2), percent(due2), beyond4*n, due4*n)
}

// drawScale draws the map of the error scale over the detector, darker where it is larger;
// "" without one. columns and rows are the detector's.
func drawScale(e *product.ErrorScale, columns, rows int) template.HTML {
	if e == nil || len(e.Map) == 0 || len(e.Map[0]) == 0 {
		return ""
	}
	most := 2.0
	for _, row := range e.Map {
		for _, q := range row {
			if q != nil {
				most = math.Max(most, *q)
			}
		}
	}
	c := newChart("Error scale over the detector", "detector column, px", "detector row, px", 0, float64(max(columns, 1)), 0, float64(max(rows, 1)))
	w, h := (chartWidth-chartRight-c.left)/float64(len(e.Map[0])), (c.bottom-chartTop)/float64(len(e.Map))
	for y, row := range e.Map {
		for x, q := range row {
			left, top := c.left+float64(x)*w, c.bottom-float64(y+1)*h
			if q == nil {
				c.Line("hatch", left, top+h, left+w, top)
				continue
			}
			fmt.Fprintf(c, `<rect x="%s" y="%s" width="%s" height="%s" fill="%s"><title>%s</title></rect>`,
				drawing.Coord(left), drawing.Coord(top), drawing.Coord(w+0.2), drawing.Coord(h+0.2), scaleGrey(*q, most), figure(*q))
		}
	}
	c.yTick = roundTicks(c.y0, c.y1, 4)
	c.axes()
	c.legend(most)
	return c.done()
}

// scaleGrey: 1 is white, the largest black, in logarithms.
func scaleGrey(q, most float64) string {
	dark := math.Log(math.Max(1, q)) / math.Log(most)
	level := uint8(math.Round(250 - 245*math.Min(1, dark)))
	return fmt.Sprintf("#%02x%02x%02x", level, level, level)
}

// legend puts a scale of greys below the chart.
func (c *chart) legend(most float64) {
	const steps, height = 40, 10.0
	y := c.bottom + chartBottom + 4
	width := (chartWidth - chartRight - c.left) / steps
	for i := range steps {
		fmt.Fprintf(c, `<rect x="%s" y="%s" width="%s" height="%s" fill="%s"/>`, drawing.Coord(c.left+float64(i)*width), drawing.Coord(y), drawing.Coord(width+0.3), drawing.Coord(height),
			scaleGrey(math.Pow(most, float64(i)/(steps-1)), most))
	}
	c.Rect("frame", c.left, y, width*steps, height)
	for _, part := range []float64{0, 0.5, 1} {
		c.Text([]string{"start", "middle", "end"}[int(2*part)], c.left+part*width*steps, y+height+17, figure(math.Round(100*math.Pow(most, part))/100))
	}
	c.height = y + height + 26
}
