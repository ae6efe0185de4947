package extract

import (
	"fmt"
	"math"

	"mirrorloom/fitsutil"
)

// sky is the celestial part of a cube's world coordinates: gnomonic, with a CD
// matrix. Places in the cube are element and row, counted from 0.
type sky struct {
	raDeg, decDeg float64
	refX, refY    float64       // CRPIX - 1
	cd            [2][2]float64 // degrees a pixel
}

const arcsecPerDeg = 3600

func readSky(h *fitsutil.Header) (*sky, error) {
	s := new(sky)
	for _, c := range []struct {
		key string
		to  *float64
	}{
		{"CRVAL1", &s.raDeg}, {"CRVAL2", &s.decDeg}, {"CRPIX1", &s.refX}, {"CRPIX2", &s.refY},
		{"CD1_1", &s.cd[0][0]}, {"CD1_2", &s.cd[0][1]}, {"CD2_1", &s.cd[1][0]}, {"CD2_2", &s.cd[1][1]},
	} {
		var err error
		if *c.to, err = h.Float(c.key); err != nil {
			return nil, err
		}
	}
	s.refX--
	s.refY--
	if det := s.determinant(); !(math.Abs(det) > 0) || math.IsInf(det, 0) {
		return nil, fmt.Errorf("the CD matrix of the cube is singular; make the cube again with reduce")
	}
	return s, nil
}

func (s *sky) determinant() float64 { return s.cd[0][0]*s.cd[1][1] - s.cd[0][1]*s.cd[1][0] }

// plane projects a position on the plane that touches the sky at the field's
// centre: degrees to the east and north. It fails behind the horizon of that plane.
func (s *sky) plane(p Position) (xi, eta float64, err error) {
	const rad = math.Pi / 180
	sinDec, cosDec := math.Sincos(p.DecDeg * rad)
	sin0, cos0 := math.Sincos(s.decDeg * rad)
	sinRA, cosRA := math.Sincos((p.RADeg - s.raDeg) * rad)
	d := sinDec*sin0 + cosDec*cos0*cosRA
	if d < 1e-3 {
		return 0, 0, fmt.Errorf("position %.6f %+.6f is far from the field, whose centre is at %.6f %+.6f (degrees)", p.RADeg, p.DecDeg, s.raDeg, s.decDeg)
	}
	return cosDec * sinRA / d / rad, (sinDec*cos0 - cosDec*sin0*cosRA) / d / rad, nil
}

// voxel is the element and row of a place in the plane.
func (s *sky) voxel(xi, eta float64) (element, row float64) {
	det := s.determinant()
	return s.refX + (s.cd[1][1]*xi-s.cd[0][1]*eta)/det, s.refY + (s.cd[0][0]*eta-s.cd[1][0]*xi)/det
}

// planeOf inverts voxel.
func (s *sky) planeOf(element, row float64) (xi, eta float64) {
	dx, dy := element-s.refX, row-s.refY
	return s.cd[0][0]*dx + s.cd[0][1]*dy, s.cd[1][0]*dx + s.cd[1][1]*dy
}

// position is the place on the sky of an element and row.
func (s *sky) position(element, row float64) Position {
	const rad = math.Pi / 180
	xi, eta := s.planeOf(element, row)
	xi, eta = xi*rad, eta*rad
	sin0, cos0 := math.Sincos(s.decDeg * rad)
	ra := s.raDeg + math.Atan2(xi, cos0-eta*sin0)/rad
	dec := math.Atan2(sin0+eta*cos0, math.Hypot(xi, cos0-eta*sin0)) / rad
	return Position{math.Mod(ra+720, 360), dec}
}
