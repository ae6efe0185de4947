package view

import (
	"fmt"
	"strconv"
	"strings"

	"mirrorloom/pipeline/extract"
)

// Bounds of an aperture: a larger one is extract's work, not a click's.
const (
	mostCorners  = 64
	mostElements = 128
	mostCells    = 6000
)

// aperture reads a shape in elements and rows, from 0:
//
//	shape=circle   j y r_arcsec
//	shape=ellipse  j y a_arcsec b_arcsec pa_deg
//	shape=polygon  points=j,y,j,y,...
//	shape=box      j0 y0 j1 y1, two corners
//
// with inner_arcsec and outer_arcsec for a ring around it whose mean is taken off, and
// optimal=1 for weights by the light's profile.
func (q *query) aperture() (o extract.SpectrumOptions) {
	var err error
	switch shape := q.text("shape"); shape {
	case "circle":
		o.Aperture, err = extract.ParseCircle(q.list("j", "y", "r_arcsec"), true)
	case "ellipse":
		o.Aperture, err = extract.ParseEllipse(q.list("j", "y", "a_arcsec", "b_arcsec", "pa_deg"), true)
	case "polygon":
		o.Aperture, err = extract.ParsePolygon(join(q.numbers("points", 2*mostCorners)), true)
	case "box":
		a, b, c, d := q.number("j0"), q.number("y0"), q.number("j1"), q.number("y1")
		if a == c || b == d {
			q.fail("the box has no area; give two corners that lie apart both ways")
		}
		o.Aperture, err = extract.ParsePolygon(join([]float64{a, b, c, b, c, d, a, d}), true)
	default:
		q.fail("shape=%.40q is unknown; give circle, ellipse, polygon or box", shape)
	}
	if q.has("inner_arcsec") || q.has("outer_arcsec") {
		ring := q.list("inner_arcsec", "outer_arcsec")
		if err == nil && q.err == nil {
			o.Background, err = extract.ParseAnnulus(ring, o.Aperture)
		}
	}
	q.known = append(q.known, "inner_arcsec", "outer_arcsec")
	o.Optimal = q.yes("optimal")
	if err != nil && q.err == nil {
		q.err = err
	}
	return o
}

// list joins parameters that must be given.
func (q *query) list(names ...string) string {
	all := make([]float64, len(names))
	for i, name := range names {
		all[i] = q.number(name)
	}
	return join(all)
}

// join writes numbers such that they read back.
func join(all []float64) string {
	text := make([]string, len(all))
	for i, x := range all {
		text[i] = strconv.FormatFloat(x, 'g', -1, 64)
	}
	return strings.Join(text, " ")
}

// fits tells whether an aperture is within bounds.
func fits(c *extract.Cube, o extract.SpectrumOptions, mostElements, mostCells int) error {
	elements, cells, err := c.Extent(o)
	if err != nil {
		return err
	}
	if elements > mostElements || cells > mostCells {
		return fmt.Errorf("the aperture touches %d elements and %d spectra, of which %d and %d are taken here; draw a smaller one, or use 'mirrorloom extract'", elements, cells, mostElements, mostCells)
	}
	return nil
}
