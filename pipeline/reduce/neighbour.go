package reduce

import (
	"mirrorloom/calib"
	"mirrorloom/hadamard"
)

// neighbourTerm takes out of decoded pixels the light that open neighbours lend
// each other.
type neighbourTerm struct {
	pairs    *hadamard.Neighbours
	geometry calib.Geometry
	term     *calib.ColourTerm
	middle   float64 // of the field, in elements
}

// neighbourSigmas is the significance from which the term is corrected: a term
// that the lamp does not show would only add its noise.
const neighbourSigmas = 3

// neighbourTerm gives the correction for a decoder, nil where there is nothing to
// correct.
func (o *optics) neighbourTerm(d *decoder) (*neighbourTerm, error) {
	if o.neighbour == nil || o.neighbour.Significance(o.geometry.L_c) < neighbourSigmas {
		return nil, nil
	}
	pairs, err := hadamard.NewNeighbours(d.code, d.elementColumns)
	if err != nil {
		return nil, err
	}
	return &neighbourTerm{pairs: pairs, geometry: o.geometry, term: o.neighbour, middle: float64(len(d.elementColumns)-1) / 2}, nil
}

// sizes fills in the term of the n pixels of row y from column x0 on.
func (t *neighbourTerm) sizes(size, slope []float32, x0, y, n int) {
	for p := range n {
		size[p], slope[p] = t.at(x0+p, y)
	}
}

// at is the term in the middle of a pixel's elements, and its slope from one to the
// next. The size of the term is linear in the wavelength, and so nearly linear over the
// elements of a pixel.
func (t *neighbourTerm) at(column, y int) (size, slope float32) {
	middle, x := t.middle, float64(column)
	row := float64(y) - t.geometry.TraceShift(x)
	below, _ := t.term.At(t.geometry.Wavelength(x, middle-0.5, row))
	above, _ := t.term.At(t.geometry.Wavelength(x, middle+0.5, row))
	return float32((below + above) / 2), float32(above - below)
}
