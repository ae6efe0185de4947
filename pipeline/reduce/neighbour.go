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
	return &neighbourTerm{pairs: pairs, geometry: o.geometry, term: o.neighbour}, nil
}

// correct works on the n pixels of row y from column x0 on. The size of the term
// is linear in the wavelength, and so nearly linear over the elements of a pixel.
func (t *neighbourTerm) correct(w *decodeWorker, x0, y, n int) {
	for p := range n {
		w.size[p], w.slope[p] = t.local(x0+p, y)
	}
	t.pairs.Correct(w.decoded, w.size, w.slope, n, n)
}

// local is the size of the term at a pixel, in the middle of the field, and its slope
// by element.
func (t *neighbourTerm) local(x, y int) (size, slope float32) {
	middle := t.geometry.J_c
	row := float64(y) - t.geometry.TraceShift(float64(x))
	below, _ := t.term.At(t.geometry.Wavelength(float64(x), middle-0.5, row))
	above, _ := t.term.At(t.geometry.Wavelength(float64(x), middle+0.5, row))
	return float32((below + above) / 2), float32(above - below)
}
