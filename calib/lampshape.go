package calib

import (
	"fmt"
	"math"
)

// LampShape is what a lamp with all elements on should look like along x: the sum
// over the elements of lamp(L) dL/dx, spread by the optics, in any unit. It fills dst
// for detector rows 0, 1, ... of columns pixels each. lamp is the known light per nm
// (black body times the profile's throughput), 0 beyond the band; fwhm is the line
// width in px. The slit's ends are not in it, nor is what the slit function adds.
//
// One element's spectrum is tabulated along x, then summed over the elements: each
// row is this sum, moved by slit tilt and smile.
func LampShape(dst []float32, g Geometry, elements, columns int, fwhm float64, lamp func(vacuumNm float64) float64) error {
	if columns < 1 || len(dst)%columns != 0 || elements < 1 {
		return fmt.Errorf("lamp shape: %d pixels are not whole rows of %d, or %d elements are none", len(dst), columns, elements)
	}
	field := fieldShape(&g, elements, columns, fwhm, lamp)
	for i := range dst {
		x, y := float64(i%columns), float64(i/columns)
		q := y - g.Y_c
		dst[i] = float32(field.at(x - g.X_c - q*(g.SlitTilt+g.Smile*q)))
	}
	return nil
}

// shapeSteps are the steps of the table per pixel: linear between, it errs by less
// than 1e-4 for an edge as wide as the lines.
const shapeSteps = 8

// A shape is a function of the place along x, tabulated.
type shape struct {
	first float64
	value []float64
}

func (s *shape) at(x float64) float64 {
	p := (x - s.first) * shapeSteps
	i := int(math.Floor(p))
	if i < 0 || i+1 >= len(s.value) {
		return 0
	}
	return s.value[i] + (s.value[i+1]-s.value[i])*(p-float64(i))
}

// fieldShape sums one element's spectrum over the field, by distance from X_c without
// the slit's lean.
func fieldShape(g *Geometry, elements, columns int, fwhm float64, lamp func(vacuumNm float64) float64) *shape {
	half := math.Abs(g.X_e) * float64(elements)
	// The field may lie beside X_c.
	reach := float64(columns) + 2*half + 64 + math.Abs(g.X_e*(g.J_c-float64(elements-1)/2))
	one := &shape{first: -reach, value: make([]float64, int(2*reach*shapeSteps)+1)}
	for i := range one.value {
		l := g.invertDispersion(one.first + float64(i)/shapeSteps)
		if math.IsNaN(l) {
			continue // no wavelength is dispersed so far
		}
		if v := lamp(g.L_c + l); v > 0 {
			one.value[i] = v / math.Abs(g.slope(l))
		}
	}
	one.spread(fwhm)
	sum := &shape{first: -reach, value: make([]float64, len(one.value))}
	for i := range sum.value {
		x := sum.first + float64(i)/shapeSteps
		for j := range elements {
			sum.value[i] += one.at(x - g.X_e*(float64(j)-g.J_c))
		}
	}
	return sum
}

// spread convolves with a Gaussian.
func (s *shape) spread(fwhm float64) {
	sigma := fwhm / fwhmPerSigma * shapeSteps
	if !(sigma > 0) {
		return
	}
	n := int(4*sigma) + 1
	kernel, total := make([]float64, 2*n+1), 0.0
	for k := range kernel {
		u := float64(k-n) / sigma
		kernel[k] = math.Exp(-u * u / 2)
		total += kernel[k]
	}
	src := append([]float64(nil), s.value...)
	for i := range s.value {
		sum := 0.0
		for k, w := range kernel {
			if at := i + k - n; at >= 0 && at < len(src) {
				sum += w * src[at]
			}
		}
		s.value[i] = sum / total
	}
}
