// Package drawing writes drawings as SVG: lines, words, arrows, round numbers for axes. It
// knows nothing of what is drawn; classes are left to the page's style.
package drawing

import (
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// SVG is a drawing that grows, without the element svg around it. Coordinates are rounded to
// hundredths of a unit; y runs downwards.
type SVG struct{ strings.Builder }

// Coord is a coordinate as text, without digits that nobody sees.
func Coord(x float64) string {
	return strconv.FormatFloat(math.Round(x*100)/100+0, 'f', -1, 64)
}

// Line is a straight line.
func (s *SVG) Line(class string, x1, y1, x2, y2 float64) {
	fmt.Fprintf(s, `<line class="%s" x1="%s" y1="%s" x2="%s" y2="%s"/>`, class, Coord(x1), Coord(y1), Coord(x2), Coord(y2))
}

// Rect is a rectangle by its upper left corner and its size.
func (s *SVG) Rect(class string, x, y, w, h float64) {
	fmt.Fprintf(s, `<rect class="%s" x="%s" y="%s" width="%s" height="%s"/>`, class, Coord(x), Coord(y), Coord(w), Coord(h))
}

// Text writes words whose middle, start or end (anchor) lies at x, on the
// baseline y.
func (s *SVG) Text(anchor string, x, y float64, words string) {
	fmt.Fprintf(s, `<text x="%s" y="%s" text-anchor="%s">`, Coord(x), Coord(y), anchor)
	xml.EscapeText(s, []byte(words)) // a Builder takes everything
	s.WriteString("</text>")
}

// Turned writes words upwards about their middle.
func (s *SVG) Turned(x, y float64, words string) {
	fmt.Fprintf(s, `<text transform="translate(%s %s) rotate(-90)" text-anchor="middle">`, Coord(x), Coord(y))
	xml.EscapeText(s, []byte(words)) // a Builder takes everything
	s.WriteString("</text>")
}

// Arrow is a line with a head, from (x, y) along the unit vector (dx, dy).
func (s *SVG) Arrow(class string, x, y, dx, dy, length float64) {
	const head, half = 8, 3.5
	tipX, tipY := x+dx*length, y+dy*length
	s.Line(class, x, y, tipX-dx*head, tipY-dy*head)
	fmt.Fprintf(s, `<path class="head" d="M%s,%sL%s,%sL%s,%sZ"/>`, Coord(tipX), Coord(tipY),
		Coord(tipX-dx*head-dy*half), Coord(tipY-dy*head+dx*half), Coord(tipX-dx*head+dy*half), Coord(tipY-dy*head-dx*half))
}

// RoundStep is the largest of 1, 2, 5 times a power of ten that is not above x.
func RoundStep(x float64) float64 {
	power := math.Pow(10, math.Floor(math.Log10(x)))
	for _, f := range []float64{5, 2} {
		if f*power <= x*(1+1e-9) {
			return f * power
		}
	}
	return power
}

// Ticks gives about n round numbers from 0 to last, in whole numbers.
func Ticks(last, n int) []int {
	step := max(1, int(RoundStep(float64(last)/float64(n))))
	var at []int
	for i := 0; i <= last; i += step {
		at = append(at, i)
	}
	return at
}
