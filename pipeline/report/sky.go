package report

import (
	"fmt"
	"math"

	"mirrorloom/fitsutil"
)

// skyPlane is the linear part of a cube's celestial coordinates: offsets in
// pixels to offsets in the tangent plane.
type skyPlane struct {
	cd            [2][2]float64 // arc seconds to the east and to the north per pixel
	refX, refY    float64       // CRPIX, counted from 0
	stepX, stepY  float64       // arc seconds per pixel along the axes, > 0
	raDeg, decDeg float64       // of the reference pixel
}

const arcsecPerDeg = 3600

// skyOf reads the CD matrix and the reference pixel.
func skyOf(h *fitsutil.Header) (skyPlane, error) {
	var s skyPlane
	var err error
	get := func(key string, scale float64) float64 {
		if err != nil {
			return 0
		}
		var x float64
		x, err = h.Float(key)
		return x * scale
	}
	for i := range 2 {
		for j := range 2 {
			s.cd[i][j] = get(fmt.Sprintf("CD%d_%d", i+1, j+1), arcsecPerDeg)
		}
	}
	s.refX, s.refY = get("CRPIX1", 1)-1, get("CRPIX2", 1)-1
	s.raDeg, s.decDeg = get("CRVAL1", 1), get("CRVAL2", 1)
	if err != nil {
		return skyPlane{}, err
	}
	s.stepX, s.stepY = math.Hypot(s.cd[0][0], s.cd[1][0]), math.Hypot(s.cd[0][1], s.cd[1][1])
	if det := s.determinant(); !(math.Abs(det) > 0) || math.IsInf(det, 0) {
		return skyPlane{}, fmt.Errorf("the CD matrix of the cube is singular; make the cube again with reduce")
	}
	return s, nil
}

func (s skyPlane) determinant() float64 { return s.cd[0][0]*s.cd[1][1] - s.cd[0][1]*s.cd[1][0] }

// offset gives a place's distance from the reference point, arc seconds to the
// east and to the north.
func (s skyPlane) offset(element, row float64) (east, north float64) {
	dx, dy := element-s.refX, row-s.refY
	return s.cd[0][0]*dx + s.cd[0][1]*dy, s.cd[1][0]*dx + s.cd[1][1]*dy
}

// direction gives the unit vector of the picture (x to the right along axis 1,
// y upwards along axis 2, both in arc seconds) that leads to the given offset on
// the sky.
func (s skyPlane) direction(east, north float64) (x, y float64) {
	det := s.determinant()
	x = (s.cd[1][1]*east - s.cd[0][1]*north) / det * s.stepX
	y = (s.cd[0][0]*north - s.cd[1][0]*east) / det * s.stepY
	length := math.Hypot(x, y)
	return x / length, y / length
}
