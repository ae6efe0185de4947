package extract

import (
	"fmt"
	"math"
	"strconv"
)

// ParseAnnulus reads "INNER OUTER", radii in arc seconds, for a ring around the
// middle of a shape: the centre of a circle or ellipse, the mean corner of a polygon.
func ParseAnnulus(text string, around *Shape) (*Shape, error) {
	s := &Shape{Form: Annulus, Text: "annulus " + text}
	f := fields(text)
	if len(f) != 2 {
		return nil, fmt.Errorf("%s: has %d numbers; give the inner and the outer radius", s.Text, len(f))
	}
	var radii [2]float64
	for i := range radii {
		x, err := strconv.ParseFloat(f[i], 64)
		if err != nil || !(x >= 0 && x < 1e6) {
			return nil, fmt.Errorf("%s: %q is no radius in arc seconds", s.Text, f[i])
		}
		radii[i] = x
	}
	if s.MinorArcsec, s.MajorArcsec = radii[0], radii[1]; s.MinorArcsec >= s.MajorArcsec {
		return nil, fmt.Errorf("%s: the inner radius must be below the outer one", s.Text)
	}
	if around == nil || len(around.Points) == 0 {
		return nil, fmt.Errorf("%s: needs a circle, an ellipse or a polygon to lie around", s.Text)
	}
	s.InVoxels = around.InVoxels
	s.Points = [][2]float64{around.middle()}
	return s, nil
}

// middle is the mean of the shape's points; right ascensions across 0 are mended.
func (s *Shape) middle() [2]float64 {
	var sum [2]float64
	for _, p := range s.Points {
		x := p[0]
		if !s.InVoxels {
			x = s.Points[0][0] + math.Remainder(x-s.Points[0][0], 360)
		}
		sum[0] += x
		sum[1] += p[1]
	}
	n := float64(len(s.Points))
	at := [2]float64{sum[0] / n, sum[1] / n}
	if !s.InVoxels {
		at[0] = math.Mod(at[0]+360, 360)
	}
	return at
}

// ring gives the cells of an annulus: those of the outer circle less the inner.
func (s *Shape) ring(k *sky, elements, rows int) ([]cell, error) {
	outer := *s
	outer.Form, outer.MinorArcsec = Circle, s.MajorArcsec
	all, err := outer.cells(k, elements, rows)
	if err != nil || s.MinorArcsec == 0 {
		return all, err
	}
	inner := outer
	inner.MajorArcsec, inner.MinorArcsec = s.MinorArcsec, s.MinorArcsec
	outline, err := inner.outline(k)
	if err != nil {
		return nil, err
	}
	hole := map[[2]int]float64{}
	for _, c := range cover(outline, elements, rows) {
		hole[[2]int{c.element, c.row}] = c.area
	}
	kept := all[:0]
	for _, c := range all {
		if c.area -= hole[[2]int{c.element, c.row}]; c.area > leastArea {
			kept = append(kept, c)
		}
	}
	if len(kept) == 0 {
		return nil, fmt.Errorf("%s: no voxel of the cube lies in it", s.Text)
	}
	return kept, nil
}
