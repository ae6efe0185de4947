package extract

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// cell is an element and row of the cube with the part of it, above 0 to 1, that
// belongs to an aperture.
type cell struct {
	element, row int
	area         float64
	background   float64 // the part that belongs to the background
}

// leastArea of a cell counts; less is rounding.
const leastArea = 1e-6

// circleCorners is the number of corners by which circle and ellipse are drawn. The
// polygon is widened to have their area.
const circleCorners = 180

// cells lists the cells of a shape by row, then by element. The error names where
// the shape lies if no cell belongs to it.
func (s *Shape) cells(k *sky, elements, rows int) ([]cell, error) {
	if s.Form == Voxels {
		return s.listed(elements, rows)
	}
	if s.Form == Annulus {
		return s.ring(k, elements, rows)
	}
	outline, err := s.outline(k)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", s.Text, err)
	}
	all := cover(outline, elements, rows)
	if len(all) == 0 {
		return nil, fmt.Errorf("%s: no voxel of the cube lies in it: it reaches element %.1f, row %.1f, where the cube has %d elements and %d rows", s.Text, outline[0][0], outline[0][1], elements, rows)
	}
	return all, nil
}

func (s *Shape) listed(elements, rows int) ([]cell, error) {
	var all []cell
	for _, y := range s.Rows {
		for _, j := range s.Elements {
			if j >= elements || y >= rows {
				return nil, fmt.Errorf("%s: the cube has elements 0 to %d and rows 0 to %d", s.Text, elements-1, rows-1)
			}
			all = append(all, cell{element: j, row: y, area: 1})
		}
	}
	sortCells(all)
	return all, nil
}

func sortCells(all []cell) {
	slices.SortFunc(all, func(a, b cell) int { return cmp.Or(cmp.Compare(a.row, b.row), cmp.Compare(a.element, b.element)) })
}

// outline is the shape's polygon in elements and rows.
func (s *Shape) outline(k *sky) ([][2]float64, error) {
	places := make([][2]float64, len(s.Points)) // in the plane, degrees
	for i, p := range s.Points {
		if s.InVoxels {
			places[i][0], places[i][1] = k.planeOf(p[0], p[1])
			continue
		}
		var err error
		if places[i][0], places[i][1], err = k.plane(Position{p[0], p[1]}); err != nil {
			return nil, err
		}
	}
	if s.Form != Polygon {
		places = s.around(places[0])
	}
	for i, p := range places {
		places[i][0], places[i][1] = k.voxel(p[0], p[1])
	}
	if s.Form == Polygon && crosses(places) {
		return nil, fmt.Errorf("its sides cross; give the corners in order around it")
	}
	return places, nil
}

// around is circle or ellipse about a centre.
func (s *Shape) around(center [2]float64) [][2]float64 {
	const step = 2 * math.Pi / circleCorners
	widen := math.Sqrt(step / math.Sin(step))
	a, b := widen*s.MajorArcsec/arcsecPerDeg, widen*s.MinorArcsec/arcsecPerDeg
	sin, cos := math.Sincos(s.PADeg * math.Pi / 180)
	all := make([][2]float64, circleCorners)
	for i := range all {
		v, u := math.Sincos(step * float64(i))
		u, v = a*u, b*v // along the major axis, and 90 degrees on
		all[i] = [2]float64{center[0] + u*sin + v*cos, center[1] + u*cos - v*sin}
	}
	return all
}

// crosses tells whether two sides of a polygon cross each other.
func crosses(p [][2]float64) bool {
	side := func(a, b, c [2]float64) float64 {
		return (b[0]-a[0])*(c[1]-a[1]) - (b[1]-a[1])*(c[0]-a[0])
	}
	n := len(p)
	for i := range n {
		a, b := p[i], p[(i+1)%n]
		for k := i + 2; k < n; k++ {
			if i == 0 && k == n-1 {
				continue
			}
			c, d := p[k], p[(k+1)%n]
			if side(a, b, c)*side(a, b, d) < 0 && side(c, d, a)*side(c, d, b) < 0 {
				return true
			}
		}
	}
	return false
}

// cover gives the cells of a polygon. Each voxel is a square of side 1 around its
// element and row.
func cover(outline [][2]float64, elements, rows int) []cell {
	low, high := [2]float64{math.Inf(1), math.Inf(1)}, [2]float64{math.Inf(-1), math.Inf(-1)}
	for _, p := range outline {
		for i, x := range p {
			low[i], high[i] = min(low[i], x), max(high[i], x)
		}
	}
	from := func(x float64, n int) int { return int(min(max(math.Floor(x+0.5), 0), float64(n))) }
	to := func(x float64, n int) int { return int(min(max(math.Ceil(x-0.5), -1), float64(n-1))) }
	var all []cell
	for y := from(low[1], rows); y <= to(high[1], rows); y++ {
		strip := clip(clip(outline, 1, float64(y)-0.5, 1), 1, float64(y)+0.5, -1)
		for j := from(low[0], elements); j <= to(high[0], elements); j++ {
			part := area(clip(clip(strip, 0, float64(j)-0.5, 1), 0, float64(j)+0.5, -1))
			if part > leastArea {
				all = append(all, cell{element: j, row: y, area: min(part, 1)})
			}
		}
	}
	return all
}

// clip keeps of a polygon what lies on one side of a line (Sutherland and Hodgman
// 1974, Commun. ACM 17, 32): coordinate axis above limit for sign 1, below for -1.
// Parts of a polygon that is not convex stay joined by sides without area.
func clip(p [][2]float64, axis int, limit, sign float64) [][2]float64 {
	var kept [][2]float64
	for i, b := range p {
		a := p[(i+len(p)-1)%len(p)]
		da, db := sign*(a[axis]-limit), sign*(b[axis]-limit)
		if da*db < 0 {
			t := da / (da - db)
			cut := [2]float64{a[0] + t*(b[0]-a[0]), a[1] + t*(b[1]-a[1])}
			cut[axis] = limit
			kept = append(kept, cut)
		}
		if db >= 0 {
			kept = append(kept, b)
		}
	}
	return kept
}

// area of a polygon, without sign.
func area(p [][2]float64) float64 {
	sum := 0.0
	for i := 1; i+1 < len(p); i++ {
		sum += (p[i][0]-p[0][0])*(p[i+1][1]-p[0][1]) - (p[i][1]-p[0][1])*(p[i+1][0]-p[0][0])
	}
	return math.Abs(sum) / 2
}
