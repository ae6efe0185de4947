package reduce

import (
	"context"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
)

// rectifier takes decoded rows to voxels: along the trace by calib.RowShift,
// then to the cube's wavelengths by calib.Resampler, once each.
type rectifier struct {
	geometry calib.Geometry
	edges    calib.Wavelengths // of the voxels
	voxels   int
	shift    *calib.RowShift
	columns  *calib.Resampler
	usage    *usage
	elements int
	uniform  bool
	// response, where not nil, is divided out of the voxels; pixelVariance is the
	// relative variance of the pixels' own response, 0 without one.
	response      *calib.Response
	pixelVariance float64
	added         []float32 // [row][element], see addedShare
	// scaled: rows bring the error scale. byElement, where not nil, multiplies the
	// variance of each element.
	scaled bool
	// low are flags of voxels most of whose mirrors do not move, [row][element]; nil for
	// none.
	low       []calib.Flag
	byElement []float32
	workers   []rectifyWorker
	// field, where not nil, shifts the voxels' light: see rectifyfield.go. group elements
	// are made together.
	field *calib.ShiftField
	group int
}

// group is the number of elements that one worker takes to voxels before it
// writes them to the strip together: 16 floats fill a cache line.
const group = 16

type rectifyWorker struct {
	// y is the trace row whose flags, error scale and, where all elements have the same,
	// variance are straightened; -1 for none.
	y                int
	signal, variance []float32 // a straightened row
	scale, applied   []float32 // straightened
	coherent         []float32 // times variance: of errors that pixels share
	flags            calib.RowFlags
	places           *calib.RowPlaces
	edges            []float64
	before           []float32
	out              spectra // of the group's elements
	field            *fieldWorker
	signals, vars    [][]float32 // one element's rows in the window
	scaleRows        [3][][]float32
	extra            []float32 // added variance of an element whose mirrors do not move
	extras           [][]float32
	none             []float32 // zeros
	added            spectra   // of one element
	bitRows          [][]calib.Flag
}

// spectra are voxels of some elements, [element][voxel].
type spectra struct {
	signal, variance, scale []float32
	flags                   []calib.Flag
}

func newSpectra(n int) spectra {
	s := spectra{make([]float32, n), make([]float32, n), make([]float32, n), make([]calib.Flag, n)}
	for i := range s.scale {
		s.scale[i] = 1
	}
	return s
}

// outStrip is some rows of the cube: [voxel][row][element].
type outStrip struct {
	y0, h            int
	signal, variance []float32
	flags            []calib.Flag
	scale            []float32
}

func newRectifier(g calib.Geometry, axis product.SpectralAxis, s shape, u *usage, workers int) (*rectifier, error) {
	if err := g.Check(s.columns, s.rows, axis.FirstNM(), axis.LastNM()); err != nil {
		return nil, err
	}
	shift := make([]float64, s.columns)
	for x := range shift {
		shift[x] = g.TraceShift(float64(x))
	}
	rows, err := calib.NewRowShift(shift, s.rows)
	if err != nil {
		return nil, err
	}
	columns, err := calib.NewResampler(0, s.columns-1)
	if err != nil {
		return nil, err
	}
	n := axis.Grid.Count
	r := &rectifier{group: group, geometry: g, edges: edgesOf(axis), voxels: n, shift: rows, columns: columns, usage: u, elements: s.elements, uniform: s.uniform}
	r.added = make([]float32, s.rows*s.elements)
	for range workers {
		r.workers = append(r.workers, rectifyWorker{
			places: calib.NewRowPlaces(g, s.elements, r.edges),
			signal: make([]float32, s.columns), variance: make([]float32, s.columns),
			scale: make([]float32, s.columns), applied: make([]float32, s.columns), coherent: make([]float32, s.columns),
			edges:  make([]float64, n+1),
			before: make([]float32, n),
			out:    newSpectra(group * n),
		})
	}
	return r, nil
}

// edgesOf are the edges of all voxels.
func edgesOf(axis product.SpectralAxis) calib.Wavelengths {
	return calib.NewWavelengths(axis.ObservedNM, axis.EvenStepNM(), -0.5, axis.Grid.Count+1)
}

// margin is the largest number of rows that a trace row reads beyond itself,
// both sides together.
func (r *rectifier) margin(rows int) int {
	most := 0
	for y := range rows {
		first, last := r.span(y)
		most = max(most, last-first)
	}
	return most
}

// span is the range of detector rows that trace row y reads.
func (r *rectifier) span(y int) (first, last int) {
	if r.field != nil {
		return r.field.Span(y)
	}
	return r.shift.Span(y)
}

// ready is the number of trace rows from y on whose rows are all below next.
func (r *rectifier) ready(y, next int) int {
	n := 0
	for ; y+n < r.usage.rows; n++ {
		if _, last := r.span(y + n); last >= next {
			break
		}
	}
	return n
}

// needs is the first detector row that trace rows from y on read.
func (r *rectifier) needs(y int) int {
	least := y
	for ; y < r.usage.rows; y++ {
		first, _ := r.span(y)
		least = min(least, first)
	}
	return max(0, least)
}

// run fills the strip from the window.
func (r *rectifier) run(ctx context.Context, out *outStrip, w *window) error {
	groups := (r.elements + r.group - 1) / r.group
	for i := range r.workers {
		r.workers[i].y = -1
	}
	return parallel.Do(ctx, len(r.workers), out.h*groups, func(worker, i int) error {
		row, j0 := i/groups, i%groups*r.group
		if r.field != nil {
			r.rectifyShifted(&r.workers[worker], out, w, row, j0)
		} else {
			r.rectify(&r.workers[worker], out, w, row, j0)
		}
		return nil
	})
}

// rectify makes the voxels of elements j0..j0+group-1 of one row.
func (r *rectifier) rectify(k *rectifyWorker, out *outStrip, w *window, row, j0 int) {
	y := out.y0 + row
	nl := r.voxels
	j1 := min(j0+r.group, r.elements)
	rows, first := r.spanned(w, y)
	if k.y != y {
		r.straightenCommon(k, rows, first, y)
	}
	for j := j0; j < j1; j++ {
		k.collect(rows, j)
		if !r.uniform {
			r.shift.Variance(k.variance, k.vars, first, y)
		}
		k.places.Places(k.edges, float64(j))
		x0, x1 := r.columns.Columns(k.edges)
		r.shift.SignalWithin(k.signal, k.signals, first, y, x0, x1)
		at := (j - j0) * nl
		r.columns.Resample(calib.Voxels{
			Signal: k.out.signal[at:], Variance: k.out.variance[at:], Flags: k.out.flags[at:], Stride: 1,
		}, k.signal, k.variance, &k.flags, k.edges)
		r.scaleVoxels(k, &k.out, at, j)
		if r.extraRows(k, rows, j) {
			r.shift.Signal(k.extra, k.extras, first, y)
			r.addExtra(k, &k.out, at)
		}
		r.flatten(k, at, j, y)
		r.flagLow(k.out.flags[at:at+nl], j, y)
	}
	r.store(k, out, row, j0, j1)
}

// spanned are the rows of the window that trace row y reads, and the first one's number.
func (r *rectifier) spanned(w *window, y int) (rows []*decodedRow, first int) {
	first, last := r.span(y)
	return w.rows[first-w.first() : last+1-w.first()], first
}

// straightenCommon turns a worker to trace row y: what all elements share is straightened
// once.
func (r *rectifier) straightenCommon(k *rectifyWorker, rows []*decodedRow, first, y int) {
	k.y = y
	k.places.SetRow(float64(y))
	k.bitRows = k.bitRows[:0]
	for _, d := range rows {
		k.bitRows = append(k.bitRows, d.flags)
	}
	r.shift.Flags(&k.flags, k.bitRows, first, y)
	k.collect(rows, 0)
	r.shift.Variance(k.variance, k.vars, first, y)
	r.straightenScale(k, rows, first, y)
}

// flatten divides the voxels of an element and row by the response of slit and
// light path, and adds the variance of both responses.
func (r *rectifier) flatten(k *rectifyWorker, at, j, y int) {
	if r.response == nil {
		return
	}
	nl := r.voxels
	signal, variance, flags := k.out.signal[at:at+nl], k.out.variance[at:at+nl], k.out.flags[at:at+nl]
	sampled := j%addedEvery == 0
	if sampled {
		copy(k.before, variance)
	}
	p := float32(r.pixelVariance)
	for i, v := range signal {
		variance[i] += p * v * v
	}
	r.response.Divide(signal, variance, flags, j, y)
	if sampled {
		r.added[y*r.elements+j] = r.addedShare(k, variance, j, y)
	}
}

// addedEvery: of every so many elements the added variance is looked at.
const addedEvery = 8

// addedShare is the median over the voxels of an element and row of the variance
// that the responses add, over what was there before; 0 without voxels.
func (r *rectifier) addedShare(k *rectifyWorker, variance []float32, j, y int) float32 {
	n := 0
	for l, after := range variance {
		if factor, _, _ := r.response.At(j, y, l); after > 0 {
			k.before[n] = after*factor*factor/k.before[l] - 1
			n++
		}
	}
	return medianOf(k.before[:n])
}

// medianOf is the median of the numbers among x, whose order is lost; 0 for none.
func medianOf(x []float32) float32 {
	x = slices.DeleteFunc(x, func(v float32) bool { return v != v })
	if len(x) == 0 {
		return 0
	}
	slices.Sort(x)
	return x[len(x)/2]
}

// addedVariance is the median of addedShare over the rows that mirrors feed.
func (r *rectifier) addedVariance() float64 {
	var all []float32
	for y := range r.usage.rows {
		for j, f := range r.usage.row(y) {
			if j%addedEvery == 0 && f == 0 {
				all = append(all, r.added[y*r.elements+j])
			}
		}
	}
	if len(all) == 0 {
		return 0
	}
	slices.Sort(all)
	return float64(all[len(all)/2])
}

// store writes a group's voxels into the strip, and voids those that no mirror
// feeds.
func (r *rectifier) store(k *rectifyWorker, out *outStrip, row, j0, j1 int) {
	nl, n := r.voxels, j1-j0
	at, plane := row*r.elements+j0, out.h*r.elements
	crosswise(out.signal, at, plane, k.out.signal, nl, n)
	crosswise(out.variance, at, plane, k.out.variance, nl, n)
	crosswise(out.flags, at, plane, k.out.flags, nl, n)
	if r.scaled || r.field != nil {
		crosswise(out.scale, at, plane, k.out.scale, nl, n)
	}
	if r.field != nil {
		return
	}
	for i, use := range r.usage.row(out.y0 + row)[j0:j1] {
		if use == 0 {
			continue
		}
		for l := range nl {
			p := at + l*plane + i
			out.signal[p], out.variance[p] = nan32, nan32
			out.flags[p] |= use
		}
	}
}

// crosswise writes the spectra [element][voxel] of n elements to dst, where voxels lie a
// plane apart and begin at index at.
func crosswise[T any](dst []T, at, plane int, spectra []T, voxels, n int) {
	if n != group {
		for l := range voxels {
			for i := range n {
				dst[at+l*plane+i] = spectra[i*voxels+l]
			}
		}
		return
	}
	var s [group][]T
	for i := range s {
		s[i] = spectra[i*voxels:][:voxels]
	}
	for l := range s[0] {
		d := (*[group]T)(dst[at+l*plane:])
		d[0], d[1], d[2], d[3] = s[0][l], s[1][l], s[2][l], s[3][l]
		d[4], d[5], d[6], d[7] = s[4][l], s[5][l], s[6][l], s[7][l]
		d[8], d[9], d[10], d[11] = s[8][l], s[9][l], s[10][l], s[11][l]
		d[12], d[13], d[14], d[15] = s[12][l], s[13][l], s[14][l], s[15][l]
	}
}

// newOut makes the memory of a strip of the cube of h rows.
func (s shape) newOut(h int) *outStrip {
	n := h * s.elements * s.voxels
	o := &outStrip{signal: make([]float32, n), variance: make([]float32, n), flags: make([]calib.Flag, n), scale: make([]float32, n)}
	for i := range o.scale {
		o.scale[i] = 1 // and stays so where no error scale is measured
	}
	return o
}

// begin makes the strip one of h rows from y0 on.
func (o *outStrip) begin(s shape, y0, h int) {
	o.y0, o.h = y0, h
	n := h * s.elements * s.voxels
	o.signal, o.variance, o.flags, o.scale = o.signal[:n], o.variance[:n], o.flags[:n], o.scale[:n]
}

// addLight has the report look at a row; nothing for no light.
func (o *outStrip) addLight(light *report.Light, row int, s shape) {
	if light == nil {
		return
	}
	for l := range s.voxels {
		at := (l*o.h + row) * s.elements
		light.AddRow(o.y0+row, o.signal[at:at+s.elements], o.flags[at:at+s.elements])
	}
}

// write hands the strip to the cube.
func (o *outStrip) write(c *fitsutil.Cube, voxels int) error {
	data := [...]any{
		product.SignalImage: o.signal, product.VarianceImage: o.variance,
		product.FlagsImageIndex: o.flags, product.ScaleImage: o.scale,
	}
	for i := range data {
		if err := c.WriteStrip(i, o.y0, o.h, 0, voxels, data[i]); err != nil {
			return err
		}
	}
	return nil
}
