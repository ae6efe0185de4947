package reduce

import (
	"context"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
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
	signal, variance []float32 // a straightened row
	scale, applied   []float32 // times variance, straightened
	coherent         []float32 // the same, of errors that pixels share
	flags            calib.RowFlags
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
	return spectra{make([]float32, n), make([]float32, n), make([]float32, n), make([]calib.Flag, n)}
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
	j1 := min(j0+group, r.elements)
	first := w.first()
	k.bitRows = k.bitRows[:0]
	for _, d := range w.rows {
		k.bitRows = append(k.bitRows, d.flags)
	}
	r.shift.Flags(&k.flags, k.bitRows, first, y)
	r.straightenScale(k, w, first, y)
	for j := j0; j < j1; j++ {
		k.collect(w, j)
		r.shift.Signal(k.signal, k.signals, first, y)
		if !r.uniform || j == j0 {
			r.shift.Variance(k.variance, k.vars, first, y)
		}
		r.geometry.Places(k.edges, float64(j), float64(y), r.edges)
		at := (j - j0) * nl
		r.columns.Resample(calib.Voxels{
			Signal: k.out.signal[at:], Variance: k.out.variance[at:], Flags: k.out.flags[at:], Stride: 1,
		}, k.signal, k.variance, &k.flags, k.edges)
		r.scaleVoxels(k, &k.out, at, j)
		if r.extraRows(k, w, j) {
			r.shift.Signal(k.extra, k.extras, first, y)
			r.addExtra(k, &k.out, at)
		}
		r.flatten(k, at, j, y)
		r.flagLow(k.out.flags[at:at+nl], j, y)
	}
	r.store(k, out, row, j0, j1)
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
	use := r.usage.row(out.y0 + row)[j0:j1]
	for l := range nl {
		at := (l*out.h+row)*r.elements + j0
		signal, variance := out.signal[at:at+n], out.variance[at:at+n]
		flags, scale := out.flags[at:at+n], out.scale[at:at+n]
		for i := range n {
			from := i*nl + l
			signal[i], variance[i], flags[i], scale[i] = k.out.signal[from], k.out.variance[from], k.out.flags[from], k.out.scale[from]
			if use[i] != 0 && r.field == nil {
				signal[i], variance[i] = nan32, nan32
				flags[i] |= use[i]
			}
		}
	}
}

// newOut makes the memory of a strip of the cube of h rows.
func (s shape) newOut(h int) *outStrip {
	n := h * s.elements * s.voxels
	return &outStrip{signal: make([]float32, n), variance: make([]float32, n), flags: make([]calib.Flag, n), scale: make([]float32, n)}
}

// begin makes the strip one of h rows from y0 on.
func (o *outStrip) begin(s shape, y0, h int) {
	o.y0, o.h = y0, h
	n := h * s.elements * s.voxels
	o.signal, o.variance, o.flags, o.scale = o.signal[:n], o.variance[:n], o.flags[:n], o.scale[:n]
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
