package reduce

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
)

// The terms are parts of the light that vary from frame to frame apart from the rest: a
// slope over the wavelengths, as extinction leaves, and the sky's lines. A frame k in
// which part m is off by -e_mk lacks e_mk of that part's light l_mk (see
// hadamard.TermGram), and a slot what its frames lack in the mean.
//
// Where an element's light of one wavelength falls depends, in a detector row, on x less
// the element's own place alone: the terms' weights are tables over that place.

// termTable is a function of the place along the dispersion, at first + i/termSteps px.
type termTable struct {
	first  float64
	values []float32
}

// termSteps a pixel are fine enough for lines two pixels wide to be interpolated.
const termSteps = 2

// at interpolates; the table's ends go on.
func (t *termTable) at(place float64) float32 {
	x := (place - t.first) * termSteps
	i := int(x)
	switch {
	case !(x > 0):
		return t.values[0]
	case i >= len(t.values)-1:
		return t.values[len(t.values)-1]
	}
	part := float32(x - float64(i))
	return t.values[i] + part*(t.values[i+1]-t.values[i])
}

// The terms in their order.
const (
	termSlope = iota // weights of the elements' light
	termLines        // the lines' light itself, of which an element has no more than its own
	termCount
)

var termNames = [termCount]string{"slope over the band", "sky lines' part"}

// terms are the tables and the sizes of a night's terms.
type terms struct {
	decoder  *hadamard.Decoder
	elements []int // code columns, in field order
	geometry calib.Geometry
	tables   [termCount]*termTable // nil for a term that is not looked for
	// e and variance are by term and step; nil for a term that is not corrected.
	e, variance [termCount][]float64
}

// place is where along the dispersion pixel (x, y) lies for element J_c.
func (t *terms) place(x, y int) float64 {
	q := float64(y) - t.geometry.Y_c
	return float64(x) - q*(t.geometry.SlitTilt+t.geometry.Smile*q)
}

// weigh fills in term m's weights of a block of n pixels at these places whose decode is
// decoded, [code column][pixel]: factors of the elements' light or, of the lines, light.
// Columns without elements are left as they are.
func (t *terms) weigh(dst []float32, m int, decoded []float32, places []float64, n int) {
	for j, column := range t.elements {
		shift := t.geometry.X_e * (float64(j) - t.geometry.J_c)
		row, light := dst[column*n:(column+1)*n], decoded[column*n:(column+1)*n]
		for p := range row {
			w := t.tables[m].at(places[p] - shift)
			if m == termLines {
				// Beyond the slit and in its dimmer parts there is less of them.
				w = max(0, min(w, light[p]))
			}
			if w != w {
				w = 0
			}
			row[p] = w
		}
	}
}

// termWork is a worker's memory for blocks of some pixels.
type termWork struct {
	places                     []float64
	light, weights, out, lacks []float32
}

func (t *terms) newWork(pixels int) *termWork {
	size := t.decoder.Code().V() * pixels
	return &termWork{
		places: make([]float64, pixels), light: make([]float32, size), weights: make([]float32, size),
		out: make([]float32, size), lacks: make([]float32, size),
	}
}

// lack puts into w.lacks what readings of n pixels lack by the terms, [code row][pixel],
// and adds to variance, if there is one, what the terms' errors make of the sum over the
// rows. w.light are the pixels' decoded columns, w.places their places, and e and
// errors by term and code row.
func (t *terms) lack(w *termWork, e, errors *[termCount][]float64, variance []float64, n int) {
	v := t.decoder.Code().V()
	clear(w.lacks[:v*n])
	for m := range e {
		if e[m] == nil {
			continue
		}
		clear(w.weights[:v*n])
		t.weigh(w.weights, m, w.light, w.places, n)
		if m != termLines {
			for i, x := range w.light[:v*n] {
				w.weights[i] *= x
			}
		}
		t.decoder.Predict(w.out, w.weights, n, n)
		for k := range v {
			by := float32(e[m][k])
			if by == 0 && errors[m][k] == 0 {
				continue
			}
			out, lacks := w.out[k*n:(k+1)*n], w.lacks[k*n:(k+1)*n]
			for p, x := range out {
				lacks[p] += by * x
			}
			if variance != nil {
				for p, x := range out {
					variance[p] += errors[m][k] * float64(x) * float64(x)
				}
			}
		}
	}
}

// corrects tells whether any term is corrected.
func (t *terms) corrects() bool {
	if t == nil {
		return false
	}
	for _, e := range t.e {
		if e != nil {
			return true
		}
	}
	return false
}

// byRow gives the terms' parts and their variances by code row, the mean over the row's
// frames, whose steps are given.
func (t *terms) byRow(steps [][]int) (e, variance [termCount][]float64) {
	for m := range t.e {
		if t.e[m] == nil {
			continue
		}
		e[m], variance[m] = make([]float64, len(steps)), make([]float64, len(steps))
		for row, list := range steps {
			n := float64(len(list))
			for _, step := range list {
				e[m][row] += t.e[m][step] / n
				variance[m][row] += t.variance[m][step] / (n * n)
			}
		}
	}
	return e, variance
}

// slotTerms are the terms of a decoder's slots.
type slotTerms struct {
	*terms
	of, errors [termCount][]float64 // by slot
}

func newSlotTerms(t *terms, slots [][]*exposure.Frame) *slotTerms {
	steps := make([][]int, len(slots))
	for i, frames := range slots {
		for _, f := range frames {
			steps[i] = append(steps[i], f.Step)
		}
	}
	s := &slotTerms{terms: t}
	s.of, s.errors = t.byRow(steps)
	return s
}

// correct takes the terms out of a block of n pixels of row y from x0 on that was decoded.
// Lost rows were filled with a mean: the terms' light is made with what the dark columns
// say of them. What the terms' errors add goes into the block's sums.
func (t *slotTerms) correct(d *decoder, w *decodeWorker, n, x0, y int) {
	work := w.terms
	for p := range n {
		work.places[p] = t.place(x0+p, y)
	}
	copy(work.light, w.decoded[:d.slots*n])
	if d.repair.restores() {
		d.repair.lost.Apply(work.light, w.missing[:len(d.repair.lost.Rows)*n], n, n)
	}
	t.lack(work, &t.of, &t.errors, w.drift[:n], n)
	t.decoder.Decode(work.out, work.lacks, n, n)
	for i, x := range work.out[:d.slots*n] {
		w.decoded[i] += x
	}
}

// newTerms prepares to look for terms: the slope's table covers what all elements see of
// columns, and is 0 in the middle of the grid and 1 from end to end of it.
func (r *reduction) newTerms(code *hadamard.Code) *terms {
	t := &terms{decoder: hadamard.NewDecoder(code), elements: r.seq.ElementColumns(), geometry: r.optics.geometry}
	first, last := t.place(0, 0), t.place(0, 0)
	for _, y := range []int{0, int(t.geometry.Y_c), r.camera.Rows - 1} {
		for _, x := range []int{0, r.camera.Columns - 1} {
			for _, j := range []float64{0, float64(len(t.elements) - 1)} {
				s := t.place(x, y) - t.geometry.X_e*(j-t.geometry.J_c)
				first, last = min(first, s), max(last, s)
			}
		}
	}
	slope := &termTable{first: math.Floor(first), values: make([]float32, int((last-math.Floor(first))*termSteps)+2)}
	axis := r.schema.Axis()
	start, end := axis.FirstNM(), axis.LastNM()
	for i := range slope.values {
		s := slope.first + float64(i)/termSteps
		nm := t.geometry.Wavelength(s, t.geometry.J_c, t.geometry.Y_c-t.geometry.TraceShift(s))
		if w := (nm - (start+end)/2) / (end - start); w == w { // light of no wavelength has none
			slope.values[i] = float32(w)
		}
	}
	t.tables[termSlope] = slope
	return t
}
