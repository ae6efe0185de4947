package report

import (
	"fmt"
	"html/template"
	"math"
	"strings"

	"mirrorloom/pipeline/drawing"
)

// The size of a chart, in units of its view box; words are 12 of them high, 17 on narrow
// screens, for which the margins have room.
const (
	chartWidth  = 560.0
	chartHeight = 255.0
	chartLeft   = 76.0
	chartRight  = 14.0
	chartTop    = 14.0
	chartBottom = 57.0
)

// chart is a plot of y over x with axes. Both have names with units.
type chart struct {
	drawing.SVG
	label         string // what it shows, where it cannot be seen
	height        float64
	left, bottom  float64 // of the plot; it ends at chartWidth-chartRight and chartTop
	x0, x1        float64
	y0, y1        float64
	logarithmic   bool // y
	logarithmicX  bool
	xName, yName  string
	xTicks, yTick []tick
}

// tick is a value of an axis with its words.
type tick struct {
	at    float64
	words string
}

// newChart begins a chart over x0..x1 and y0..y1; equal ends are taken apart.
func newChart(label, xName, yName string, x0, x1, y0, y1 float64) *chart {
	if !(x1 > x0) {
		x0, x1 = x0-0.5, x0+0.5
	}
	if !(y1 > y0) {
		pad := max(0.5, math.Abs(y0)/10)
		y0, y1 = y0-pad, y0+pad
	}
	c := &chart{label: label, height: chartHeight, left: chartLeft, bottom: chartHeight - chartBottom, x0: x0, x1: x1, y0: y0, y1: y1, xName: xName, yName: yName}
	c.xTicks, c.yTick = roundTicks(x0, x1, 5), roundTicks(y0, y1, 4)
	return c
}

// logY makes the y axis logarithmic; both ends must be above 0.
func (c *chart) logY() {
	c.logarithmic = true
	c.yTick = logTicks(c.y0, c.y1)
}

// logTicks are powers of ten and three times them, every other where there are many.
func logTicks(low, high float64) []tick {
	var all []tick
	for p := math.Floor(math.Log10(low)); p <= math.Ceil(math.Log10(high)); p++ {
		for _, f := range []float64{1, 3} {
			if v := f * math.Pow(10, p); v >= low*0.999 && v <= high*1.001 {
				all = append(all, tick{v, figure(v)})
			}
		}
	}
	for len(all) > 6 {
		kept := all[:0]
		for i, t := range all {
			if i%2 == 0 {
				kept = append(kept, t)
			}
		}
		all = kept
	}
	return all
}

// logX makes the x axis logarithmic; both ends must be above 0.
func (c *chart) logX() {
	c.logarithmicX = true
	c.xTicks = logTicks(c.x0, c.x1)
}

// x and y are the places of values in the drawing.
func (c *chart) x(v float64) float64 {
	part := (v - c.x0) / (c.x1 - c.x0)
	if c.logarithmicX {
		part = math.Log(v/c.x0) / math.Log(c.x1/c.x0)
	}
	return c.left + part*(chartWidth-chartRight-c.left)
}

func (c *chart) y(v float64) float64 {
	part := (v - c.y0) / (c.y1 - c.y0)
	if c.logarithmic {
		part = math.Log(v/c.y0) / math.Log(c.y1/c.y0)
	}
	return c.bottom - part*(c.bottom-chartTop)
}

// roundTicks puts about n labelled ticks at round numbers.
func roundTicks(low, high float64, n int) []tick {
	step := drawing.RoundStep((high - low) / float64(n-1))
	var all []tick
	for i := math.Ceil(low/step - 1e-9); i*step <= high+1e-9*step; i++ {
		all = append(all, tick{i * step, figure(i * step)})
	}
	return all
}

// axes draws the frame, the ticks and the names.
func (c *chart) axes() {
	right := chartWidth - chartRight
	for _, t := range c.yTick {
		c.Line("grid", c.left, c.y(t.at), right, c.y(t.at))
		c.Text("end", c.left-7, c.y(t.at)+4, t.words)
	}
	c.Line("axis", c.left, chartTop, c.left, c.bottom)
	c.Line("axis", c.left, c.bottom, right, c.bottom)
	for _, t := range c.xTicks {
		c.Line("axis", c.x(t.at), c.bottom, c.x(t.at), c.bottom+5)
		c.Text("middle", c.x(t.at), c.bottom+23, t.words)
	}
	c.WriteString(`<g class="name">`)
	c.Text("middle", (c.left+right)/2, c.bottom+47, c.xName)
	if c.yName != "" {
		c.Turned(16, (chartTop+c.bottom)/2, c.yName)
	}
	c.WriteString("</g>")
}

// level draws a line right across at a value that means something.
func (c *chart) level(v float64) {
	if v > c.y0 && v < c.y1 {
		c.Line("due", c.left, c.y(v), chartWidth-chartRight, c.y(v))
	}
}

// path draws a line through points; not-a-numbers leave gaps. A point between two gaps is
// drawn half a step wide on both sides.
func (c *chart) path(class string, x, y []float64, step float64) {
	fmt.Fprintf(c, `<path class="%s" d="`, class)
	for i := range y {
		switch before, after := i > 0 && !math.IsNaN(y[i-1]), i+1 < len(y) && !math.IsNaN(y[i+1]); {
		case math.IsNaN(y[i]):
		case !before && !after:
			fmt.Fprintf(c, "M%s,%sL%s,%s", drawing.Coord(c.x(x[i]-step/2)), drawing.Coord(c.y(y[i])), drawing.Coord(c.x(x[i]+step/2)), drawing.Coord(c.y(y[i])))
		default:
			command := "L"
			if !before {
				command = "M"
			}
			fmt.Fprintf(c, "%s%s,%s", command, drawing.Coord(c.x(x[i])), drawing.Coord(c.y(y[i])))
		}
	}
	c.WriteString(`"/>`)
}

// errorBar draws a value with its error on both sides.
func (c *chart) errorBar(class string, x, y, sigma float64) {
	c.Line(class, c.x(x), c.y(max(y-sigma, c.y0)), c.x(x), c.y(min(y+sigma, c.y1)))
}

// The marks that tell series apart without colours.
var marks = []string{"disc", "ring", "square", "cross"}

// mark draws one of them.
func mark(s *drawing.SVG, kind string, x, y, r float64) {
	switch kind {
	case "square":
		s.Rect("ringmark", x-r, y-r, 2*r, 2*r)
	case "cross":
		fmt.Fprintf(s, `<path class="crossmark" d="M%s,%sL%s,%sM%s,%sL%s,%s"/>`, drawing.Coord(x-r), drawing.Coord(y-r), drawing.Coord(x+r), drawing.Coord(y+r),
			drawing.Coord(x-r), drawing.Coord(y+r), drawing.Coord(x+r), drawing.Coord(y-r))
	default:
		fmt.Fprintf(s, `<circle class="%smark" cx="%s" cy="%s" r="%s"/>`, kind, drawing.Coord(x), drawing.Coord(y), drawing.Coord(r))
	}
}

// done gives the chart.
func (c *chart) done() template.HTML {
	return wrapSVG("chart", c.label, chartWidth, c.height, c.String())
}

// wrapSVG puts the element svg around a drawing; label is for those who cannot see it.
func wrapSVG(class, label string, width, height float64, body string) template.HTML {
	var s strings.Builder
	fmt.Fprintf(&s, `<svg class="%s" viewBox="0 0 %s %s" role="img" aria-label="%s" xmlns="http://www.w3.org/2000/svg">`,
		class, drawing.Coord(width), drawing.Coord(height), template.HTMLEscapeString(label))
	s.WriteString(body)
	s.WriteString("</svg>")
	return template.HTML(s.String())
}

// span is the least and the largest of some numbers and of those that must be in, with a
// little air; not-a-numbers count for nothing.
func span(in []float64, numbers ...[]float64) (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, list := range append(numbers, in) {
		for _, v := range list {
			if !math.IsNaN(v) && !math.IsInf(v, 0) {
				low, high = min(low, v), max(high, v)
			}
		}
	}
	if low > high {
		return 0, 1
	}
	air := 0.05 * (high - low)
	return low - air, high + air
}
