package report

import (
	"encoding/xml"
	"fmt"
	"math"
	"strconv"
	"strings"
)

// svg writes a drawing. Coordinates are rounded to hundredths of a unit.
type svg struct{ strings.Builder }

// coord is a coordinate as text, without digits that nobody sees.
func coord(x float64) string {
	return strconv.FormatFloat(math.Round(x*100)/100+0, 'f', -1, 64)
}

func (s *svg) line(class string, x1, y1, x2, y2 float64) {
	fmt.Fprintf(s, `<line class="%s" x1="%s" y1="%s" x2="%s" y2="%s"/>`, class, coord(x1), coord(y1), coord(x2), coord(y2))
}

func (s *svg) rect(class string, x, y, w, h float64) {
	fmt.Fprintf(s, `<rect class="%s" x="%s" y="%s" width="%s" height="%s"/>`, class, coord(x), coord(y), coord(w), coord(h))
}

// text writes words whose middle, start or end (anchor) lies at x, on the
// baseline y.
func (s *svg) text(anchor string, x, y float64, words string) {
	fmt.Fprintf(s, `<text x="%s" y="%s" text-anchor="%s">`, coord(x), coord(y), anchor)
	xml.EscapeText(s, []byte(words)) // a Builder takes everything
	s.WriteString("</text>")
}

// turned writes words upwards about their middle.
func (s *svg) turned(x, y float64, words string) {
	fmt.Fprintf(s, `<text transform="translate(%s %s) rotate(-90)" text-anchor="middle">`, coord(x), coord(y))
	xml.EscapeText(s, []byte(words)) // a Builder takes everything
	s.WriteString("</text>")
}

// arrow is a line with a head, from (x, y) along the unit vector (dx, dy).
func (s *svg) arrow(class string, x, y, dx, dy, length float64) {
	const head, half = 8, 3.5
	tipX, tipY := x+dx*length, y+dy*length
	s.line(class, x, y, tipX-dx*head, tipY-dy*head)
	fmt.Fprintf(s, `<path class="head" d="M%s,%sL%s,%sL%s,%sZ"/>`, coord(tipX), coord(tipY),
		coord(tipX-dx*head-dy*half), coord(tipY-dy*head+dx*half), coord(tipX-dx*head+dy*half), coord(tipY-dy*head-dx*half))
}

// roundStep is the largest of 1, 2, 5 times a power of ten that is not above x.
func roundStep(x float64) float64 {
	power := math.Pow(10, math.Floor(math.Log10(x)))
	for _, f := range []float64{5, 2} {
		if f*power <= x*(1+1e-9) {
			return f * power
		}
	}
	return power
}

// ticks gives about n round numbers from 0 to last, in whole numbers.
func ticks(last, n int) []int {
	step := max(1, int(roundStep(float64(last)/float64(n))))
	var at []int
	for i := 0; i <= last; i += step {
		at = append(at, i)
	}
	return at
}
