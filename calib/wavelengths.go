package calib

// Wavelengths is an ordered list of wavelengths at the telescope, vacuum nm, ascending or
// descending: the edges or centres of a grid's voxels, whatever the grid's own scale is.
// The zero value is an empty list. Immutable; copy it freely.
type Wavelengths struct {
	firstNM, stepNM float64 // where listed is nil
	count           int
	listed          []float64
}

// NewWavelengths are nm(from), nm(from+1), ... nm(from+count-1), each an even stepNM from
// the last; a stepNM of 0 says that they are not evenly spaced.
func NewWavelengths(nm func(i float64) float64, stepNM, from float64, count int) Wavelengths {
	w := Wavelengths{stepNM: stepNM, count: count}
	if stepNM != 0 {
		w.firstNM = nm(from)
		return w
	}
	w.listed = make([]float64, count)
	for i := range w.listed {
		w.listed[i] = nm(from + float64(i))
	}
	return w
}

// Count is their number.
func (w Wavelengths) Count() int { return w.count }

// at is wavelength i.
func (w Wavelengths) at(i int) float64 {
	if w.stepNM == 0 {
		return w.listed[i]
	}
	return w.firstNM + float64(i)*w.stepNM
}

// Places fills dst, as long as w, with the detector columns X(j, y0, L) of wavelengths.
// It returns dst.
func (g *Geometry) Places(dst []float64, j, y0 float64, w Wavelengths) []float64 {
	if w.stepNM == 0 {
		return g.EdgesXAt(dst, j, y0, w.listed)
	}
	return g.EdgesX(dst, j, y0, w.firstNM, w.stepNM)
}
