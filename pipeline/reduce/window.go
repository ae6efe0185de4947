package reduce

import "mirrorloom/calib"

// decodedRow is one detector row after decoding.
type decodedRow struct {
	y      int
	signal [][]float32 // [element][column], electrons
	// variance is [element][column], or [0][column] where all elements of a
	// pixel have the same.
	variance [][]float32
	flags    []calib.Flag // [column]
	// own are the flags before those of neighbouring rows spread to this one.
	own []calib.Flag
	// common is the part of variance that all elements of a pixel share: that of what
	// was taken off all frames. pixel is filled in where variance differs between the
	// elements: the mean over the code columns of what decoding alone gives them or, of a
	// slit scan, the variance of a sample that no open mirror lights.
	common, pixel []float32
	// measured is, by column, the mean square of the dark decodes in units of the
	// variance of elements, unmeasured where flags forbid it; expected is that variance
	// as the noise model has it, before the response is divided out.
	measured, expected []float32
	// pedestal is the mean of the dark decodes, where it is to be taken off, and level
	// what was taken off.
	pedestal, level []float32
	// along is, by column, the mean product of its dark decodes and those of the next
	// column, in the units of measured.
	along []float32
	// scale is the error scale q. applied is by what the variance is multiplied as that
	// of independent pixels, and coherent what is added, in units of it, for errors that
	// neighbouring pixels share: see scaleErrors.
	scale, applied, coherent []float32
	// whole are the elements of which mirrors do not move, with all their light; signal
	// keeps what was decoded.
	whole []wholeElement
}

// wholeOf is that of an element; nil where all its mirrors move.
func (r *decodedRow) wholeOf(j int) *wholeElement {
	for i := range r.whole {
		if r.whole[i].element == j {
			return &r.whole[i]
		}
	}
	return nil
}

// light is the signal of an element, the light of mirrors that do not move put in.
func (r *decodedRow) light(j int) []float32 {
	if whole := r.wholeOf(j); whole != nil {
		return whole.signal
	}
	return r.signal[j]
}

func newDecodedRow(elements, variances, columns int) *decodedRow {
	return &decodedRow{
		signal: planes(elements, columns), variance: planes(variances, columns),
		flags: make([]calib.Flag, columns), own: make([]calib.Flag, columns),
		common: make([]float32, columns), pixel: make([]float32, columns),
		measured: make([]float32, columns), expected: make([]float32, columns),
		pedestal: make([]float32, columns), level: make([]float32, columns),
		scale: make([]float32, columns), applied: make([]float32, columns),
		coherent: make([]float32, columns), along: make([]float32, columns),
	}
}

// pixelVariance is what PIXELVAR holds of the row.
func (r *decodedRow) pixelVariance(uniform bool) (own, common []float32) {
	if uniform {
		return r.variance[0], r.common
	}
	return r.pixel, r.common
}

// window holds decoded rows in order until no trace needs them.
type window struct {
	rows []*decodedRow
	free []*decodedRow
	make func() *decodedRow
}

func newWindow(s shape) *window {
	variances := 1
	if !s.uniform {
		variances = s.elements
	}
	return &window{make: func() *decodedRow {
		return newDecodedRow(s.elements, variances, s.columns)
	}}
}

// planes makes n rows in one piece of memory.
func planes(n, columns int) [][]float32 {
	all := make([]float32, n*columns)
	rows := make([][]float32, n)
	for i := range rows {
		rows[i] = all[i*columns : (i+1)*columns : (i+1)*columns]
	}
	return rows
}

// extend appends rows y0..y1-1, whose contents are yet to be filled in.
func (w *window) extend(y0, y1 int) []*decodedRow {
	from := len(w.rows)
	for y := y0; y < y1; y++ {
		var r *decodedRow
		if n := len(w.free); n > 0 {
			r, w.free = w.free[n-1], w.free[:n-1]
		} else {
			r = w.make()
		}
		r.y, r.whole = y, nil
		w.rows = append(w.rows, r)
	}
	return w.rows[from:]
}

// dropBefore frees the rows below y.
func (w *window) dropBefore(y int) {
	n := 0
	for n < len(w.rows) && w.rows[n].y < y {
		n++
	}
	w.free = append(w.free, w.rows[:n]...)
	w.rows = append(w.rows[:0], w.rows[n:]...)
}

// first is the detector row of rows[0].
func (w *window) first() int { return w.rows[0].y }

// next is the row that follows the last one.
func (w *window) next() int { return w.rows[len(w.rows)-1].y + 1 }
