package rehearse

// strip is a run of detector rows y0 <= y < y1 with all mirror rows whose light
// reaches them. What it holds of a row does not depend on where strips begin.
type strip struct {
	y0, y1 int
	// mirrors are the mirror rows w = first, first+1, ...
	first   int
	mirrors []*mirrorRow
	// rows draw the detector rows y0, y0+1, ...
	rows []rowDrawing
}

// rowDrawing says how the mirror rows reach a detector row: weights[k][i] is the
// part of the light at grid point i of mirrors[first+k] that falls on the row.
//
// The spot is a product of two Gaussians, so that the part is int G over the
// row about the trace at the point where the light lands; what is summed over
// mirror rows with these weights only has to be spread along x. Nothing is
// approximated but the grid's own sums.
type rowDrawing struct {
	first   int
	weights [][]float64
}

// newStrip lays out rows y0 <= y < y1; prepareMirror and prepareRow fill it, in
// any order, mirrors first. Voxels need mirror rows a little farther out than
// pixels do.
func (o *optics) newStrip(y0, y1 int) *strip {
	s := &strip{y0: y0, y1: y1, rows: make([]rowDrawing, y1-y0)}
	first, last := o.mirrorRows(float64(y0)-voxelReach, float64(y1-1)+voxelReach)
	s.first = first
	s.mirrors = make([]*mirrorRow, max(last-first+1, 0))
	return s
}

// prepareMirror fills in mirrors[k].
func (o *optics) prepareMirror(s *strip, k int) { s.mirrors[k] = o.newMirrorRow(s.first + k) }

// prepareRow fills in rows[k].
func (o *optics) prepareRow(s *strip, k int) { s.rows[k] = o.rowDrawing(s, k, 0) }

// rowDrawing draws row k of a strip; dy is how far the image has moved up.
func (o *optics) rowDrawing(s *strip, k int, dy float64) rowDrawing {
	y := float64(s.y0+k) - dy
	var r rowDrawing
	first, last := o.mirrorRows(y, y)
	for w := first; w <= last; w++ {
		at := w - s.first
		if at < 0 || at >= len(s.mirrors) {
			continue
		}
		if len(r.weights) == 0 {
			r.first = at
		}
		r.weights = append(r.weights, o.rowWeights(y, s.mirrors[at].row))
	}
	return r
}

// rowWeights is the part that lands on row y of light of a mirror row, by grid
// point.
func (o *optics) rowWeights(y, row float64) []float64 {
	weights := make([]float64, o.axis.n)
	for i := range weights {
		weights[i] = o.spread.rowShare(y - row - o.traces[i])
	}
	return weights
}

// sum weighs the densities of the mirror rows (index as in strip.mirrors) into g
// and returns the points touched; g must be 0 and is to be cleared by the
// caller.
func (r *rowDrawing) sum(g []float64, light []density) (from, to int) {
	from, to = len(g), 0
	for k, weights := range r.weights {
		d := &light[r.first+k]
		if d.from >= d.to {
			continue
		}
		from, to = min(from, d.from), max(to, d.to)
		addProduct(g[d.from:d.to], d.h[d.from:d.to], weights[d.from:d.to])
	}
	return from, to
}

// addProduct adds a[i] b[i] to dst[i].
func addProduct(dst, a, b []float64) {
	a, b = a[:len(dst)], b[:len(dst)]
	for i := range dst {
		dst[i] += a[i] * b[i]
	}
}

// drawRow writes the pixels of a detector row in electrons per second. scratch
// holds axis.n zeros and is left so.
func (o *optics) drawRow(dst []float32, r *rowDrawing, light []density, kernel, scratch []float64) {
	from, to := r.sum(scratch, light)
	if from >= to {
		clear(dst)
		return
	}
	integrate(dst, scratch, kernel, o.axis, from, to)
	clear(scratch[from:to])
}

// newDensities makes n empty densities.
func (o *optics) newDensities(n int) []density {
	list := make([]density, n)
	for i := range list {
		list[i] = density{h: make([]float64, o.axis.n), from: o.axis.n}
	}
	return list
}
