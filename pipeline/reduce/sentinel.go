package reduce

import (
	"context"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// sentinelChunks is into how many chunks of wavelength a sentinel's light is cut.
const sentinelChunks = 8

// The parameters of a sentinel's fit, behind the flux of each chunk: the image's move
// along x and y and its widening along the slit.
const (
	moveX = iota
	moveY
	widen
	motions
)

// sentinel is one range of sentinel rows. With m the mean image over the frames, the
// image of frame k is, to first order in its motion,
//
//	y_k = F_k(chunk) m - dx m_x - dy m_y + (1/2) d(sigma^2) m_yy,
//
// fitted by least squares with the weights of the mean image's variance, the same for
// all frames.
type sentinel struct {
	r             *reduction
	element       int
	first, last   float64 // the trace rows between which the light is the sentinel's alone
	y0, y1        int     // detector rows that hold them at some column, with a margin
	mean          []float64
	variance      []float64
	normal        *mat.SymDense
	right         [][]float64 // [frame][parameter]
	pixels        int         // of the window
	widthSum      [3]float64  // sums of m, m y, m y^2 over the window
	firstNM, span float64
}

// sentinelResult is what the sentinel rows say of the frames.
type sentinelResult struct {
	c *relative
	// chunks is the flux of each chunk relative to its mean, [chunk][frame], with its
	// errors; NaN where a chunk has no light.
	chunks, chunkErr [][]float64
	// moves are the motions by frame: px, px, and the relative width of the image.
	moves    [motions][]float64
	movesErr [motions]float64
}

// measureSentinel measures the frames by sentinel rows; nil if there are none, or none
// wide enough.
func (r *reduction) measureSentinel(ctx context.Context, frames []*exposure.Frame) (*sentinelResult, error) {
	var best *sentinelResult
	for _, rows := range r.seq.Rows {
		if rows.Use != sequence.UseSentinel {
			continue
		}
		s := r.newSentinel(rows)
		if s == nil {
			continue
		}
		if err := s.fill(ctx, r.correction.offset, len(frames)); err != nil {
			return nil, err
		}
		found := s.solve(len(frames))
		if found == nil {
			continue
		}
		if best == nil || rmsError(found.c) < rmsError(best.c) {
			best = found
		}
	}
	return best, nil
}

// rmsError is the rms of a measurement's errors.
func rmsError(m *relative) float64 {
	sum := 0.0
	for _, e := range m.err {
		sum += e * e
	}
	return math.Sqrt(sum / float64(max(1, len(m.err))))
}

// newSentinel finds the rows that light from beyond the sentinel's mirrors does not
// reach: one and a half line widths inside of its ends, or its inner third.
func (r *reduction) newSentinel(rows sequence.RowRange) *sentinel {
	p := r.seq.Profile
	place := func(w float64) float64 {
		return p.Spectrograph.YCenterPx + p.Spectrograph.WStepPx*(w-p.WCenter())
	}
	a, b := place(float64(rows.First)-0.5), place(float64(rows.Last)+0.5)
	low, high := min(a, b), max(a, b)
	inside := min(1.5*p.Spectrograph.LSFFWHMPx, (high-low)/3)
	s := &sentinel{r: r, element: rows.Element, first: low + inside, last: high - inside}
	least, most := math.Inf(1), math.Inf(-1)
	for x := range r.camera.Columns {
		shift := r.optics.geometry.TraceShift(float64(x))
		least, most = min(least, shift), max(most, shift)
	}
	s.y0 = max(0, int(math.Floor(s.first+least))-2)
	s.y1 = min(r.camera.Rows, int(math.Ceil(s.last+most))+3)
	if s.y1-s.y0 < 5 {
		return nil
	}
	axis := r.schema.Axis()
	s.firstNM, s.span = axis.FirstNM(), axis.LastNM()-axis.FirstNM()
	n := sentinelChunks + motions
	s.normal = mat.NewSymDense(n, nil)
	return s
}

// chunk is the chunk of wavelength of a pixel; -1 for one outside of the window.
func (s *sentinel) chunk(x, y int) int {
	g := &s.r.optics.geometry
	row := float64(y) - g.TraceShift(float64(x))
	if row < s.first || row > s.last {
		return -1
	}
	part := (g.Wavelength(float64(x), float64(s.element), row) - s.firstNM) / s.span
	if !(part >= 0 && part < 1) {
		return -1
	}
	return int(part * sentinelChunks)
}

// fill reads the frames twice: for the mean image, and for each frame's sums.
func (s *sentinel) fill(ctx context.Context, offset []float64, frames int) error {
	columns := s.r.camera.Columns
	s.mean, s.variance = make([]float64, (s.y1-s.y0)*columns), make([]float64, (s.y1-s.y0)*columns)
	for i := range s.mean {
		s.mean[i] = math.NaN()
	}
	rows := make([]int, s.y1-s.y0)
	for i := range rows {
		rows[i] = s.y0 + i
	}
	all := &sampler{r: s.r, frames: s.r.scienceFrames(), rows: rows, offset: offset, keep: func(int, int, int) bool { return true }}
	err := all.each(ctx, func(chunk *sample) error {
		for p, at := range chunk.pixels {
			sum := 0.0
			for k := range chunk.readings {
				sum += float64(chunk.readings[k][p])
			}
			i := (at.y-s.y0)*columns + at.x
			s.mean[i] = sum / float64(frames)
			s.variance[i] = chunk.quiet[p] + max(0, (1+s.r.camera.PhotonExcess)*(s.mean[i]+float64(chunk.dark[p])))
		}
		return nil
	})
	if err != nil {
		return err
	}
	s.right = make([][]float64, frames)
	for k := range s.right {
		s.right[k] = make([]float64, sentinelChunks+motions)
	}
	window := *all
	window.keep = func(_, x, y int) bool {
		_, ok := s.gradient(x, y)
		return ok && s.chunk(x, y) >= 0
	}
	return window.each(ctx, func(chunk *sample) error { return s.add(ctx, chunk) })
}

// gradient gives m_x, m_y and m_yy of the mean image; not at its rim or beside a pixel
// without a value.
func (s *sentinel) gradient(x, y int) (d [motions]float64, ok bool) {
	columns := s.r.camera.Columns
	if x < 1 || x > columns-2 || y < s.y0+1 || y > s.y1-2 {
		return d, false
	}
	i := (y-s.y0)*columns + x
	m := s.mean
	d[moveX] = (m[i+1] - m[i-1]) / 2
	d[moveY] = (m[i+columns] - m[i-columns]) / 2
	d[widen] = m[i+columns] - 2*m[i] + m[i-columns]
	sum := d[moveX] + d[moveY] + d[widen]
	return d, !math.IsNaN(sum) && s.variance[i] > 0
}

// add puts a chunk of the window into the sums.
func (s *sentinel) add(ctx context.Context, chunk *sample) error {
	columns := s.r.camera.Columns
	n := sentinelChunks + motions
	design := make([]float64, len(chunk.pixels)*(1+motions)) // m and the gradients
	part := make([]int, len(chunk.pixels))
	row := make([]float64, n)
	for p, at := range chunk.pixels {
		i := (at.y-s.y0)*columns + at.x
		d, _ := s.gradient(at.x, at.y)
		part[p] = s.chunk(at.x, at.y)
		q := design[p*(1+motions):]
		q[0], q[1], q[2], q[3] = s.mean[i], -d[moveX], -d[moveY], d[widen]/2
		clear(row)
		row[part[p]] = q[0]
		copy(row[sentinelChunks:], q[1:1+motions])
		for a := range n {
			if row[a] == 0 {
				continue
			}
			for b := a; b < n; b++ {
				s.normal.SetSym(a, b, s.normal.At(a, b)+row[a]*row[b]/s.variance[i])
			}
		}
		y := float64(at.y) - s.r.optics.geometry.TraceShift(float64(at.x))
		s.pixels++
		s.widthSum[0] += q[0]
		s.widthSum[1] += q[0] * y
		s.widthSum[2] += q[0] * y * y
	}
	return parallel.Do(ctx, s.r.opts.Workers, len(chunk.readings), func(_, k int) error {
		level := s.level(chunk, k, design)
		for p, at := range chunk.pixels {
			i := (at.y-s.y0)*columns + at.x
			q := design[p*(1+motions):]
			y := float64(chunk.readings[k][p])
			expected := level * q[0]
			if y != y || math.Abs(y-expected) > struckSigmas*math.Sqrt(s.variance[i]+imageSlack*imageSlack*q[0]*q[0]) {
				y = expected // saturated or struck
			}
			s.right[k][part[p]] += q[0] * y / s.variance[i]
			for a := range motions {
				s.right[k][sentinelChunks+a] += q[1+a] * y / s.variance[i]
			}
		}
		return nil
	})
}

// A sample of a sentinel is taken for struck when it is off by more than struckSigmas of
// its noise and imageSlack of the mean image, by which an image that moves may differ.
const (
	struckSigmas = 6
	imageSlack   = 0.1
)

// level is the median ratio of a frame's readings to the mean image, over its brighter
// half.
func (s *sentinel) level(chunk *sample, k int, design []float64) float64 {
	bright := make([]float64, len(chunk.pixels))
	for p := range bright {
		bright[p] = design[p*(1+motions)]
	}
	slices.Sort(bright)
	if len(bright) == 0 {
		return 1
	}
	limit := max(bright[len(bright)/2], 1) // electrons
	var ratios []float64
	for p := range chunk.pixels {
		y := float64(chunk.readings[k][p])
		if m := design[p*(1+motions)]; m >= limit && y == y {
			ratios = append(ratios, y/m)
		}
	}
	if len(ratios) == 0 {
		return 1
	}
	slices.Sort(ratios)
	return ratios[len(ratios)/2]
}

// solve fits all frames: once with one flux, for the throughput, and once with a flux a
// chunk.
func (s *sentinel) solve(frames int) *sentinelResult {
	if s.widthSum[0] <= 0 {
		return nil
	}
	const n = sentinelChunks + motions
	s.takeGradientNoise(frames)
	grey := mat.NewDense(1+motions, n, nil) // sums chunks up
	for c := range sentinelChunks {
		grey.Set(0, c, 1)
	}
	for a := range motions {
		grey.Set(1+a, sentinelChunks+a, 1)
	}
	var one mat.Dense
	one.Product(grey, s.normal, grey.T())
	inverse, ok := inverseOf(&one, 1)
	if !ok {
		return nil
	}
	center := s.widthSum[1] / s.widthSum[0]
	sigma2 := s.widthSum[2]/s.widthSum[0] - center*center
	out := &sentinelResult{c: newRelative(frames)}
	for a := range motions {
		out.moves[a] = make([]float64, frames)
	}
	scale := [motions]float64{1, 1, 1 / (2 * max(sigma2, 0.1))} // relative width: d(sigma^2)/(2 sigma^2)
	for k := range frames {
		var b, x mat.VecDense
		b.MulVec(grey, mat.NewVecDense(n, s.right[k]))
		x.MulVec(inverse, &b)
		out.c.c[k], out.c.err[k] = x.AtVec(0), math.Sqrt(inverse.At(0, 0)*max(x.AtVec(0), 0.1))
		for a := range motions {
			out.moves[a][k] = scale[a] * x.AtVec(1+a) / max(x.AtVec(0), 0.1)
		}
	}
	for a := range motions {
		out.movesErr[a] = scale[a] * math.Sqrt(inverse.At(1+a, 1+a))
	}
	s.solveChunks(out, frames)
	return out
}

// takeGradientNoise takes from the normal equations what the noise of the mean image
// makes of its gradients, which would look like structure that a motion moves: of
// readings of unit variance m_x and m_y have 1/2 over the number of frames, m_yy/2 has
// 6/4. Gradients that do not stand out of it tell nothing.
func (s *sentinel) takeGradientNoise(frames int) {
	for a, noise := range [motions]float64{0.5, 0.5, 1.5} {
		at := sentinelChunks + a
		noise *= float64(s.pixels) / float64(frames)
		left := s.normal.At(at, at) - noise
		if left < 0.2*noise {
			left = 0
			for b := range sentinelChunks + motions {
				s.normal.SetSym(at, b, 0)
			}
			for k := range s.right {
				s.right[k][at] = 0
			}
		}
		s.normal.SetSym(at, at, left)
	}
}

// solveChunks fits a flux a chunk.
func (s *sentinel) solveChunks(out *sentinelResult, frames int) {
	inverse, ok := inverseOf(s.normal, sentinelChunks)
	if !ok {
		return
	}
	out.chunks, out.chunkErr = make([][]float64, sentinelChunks), make([][]float64, sentinelChunks)
	for c := range sentinelChunks {
		out.chunks[c], out.chunkErr[c] = make([]float64, frames), make([]float64, frames)
		dim := s.normal.At(c, c) == 0
		for k := range frames {
			row := inverse.RowView(c)
			flux := mat.Dot(row, mat.NewVecDense(len(s.right[k]), s.right[k]))
			out.chunks[c][k], out.chunkErr[c][k] = flux, math.Sqrt(inverse.At(c, c)*max(flux, 0.1))
			if dim {
				out.chunks[c][k], out.chunkErr[c][k] = math.NaN(), math.NaN()
			}
		}
	}
}

// inverseOf inverts normal equations of so many fluxes and the motions. Motions are
// taken to be of the order of a pixel, and fluxes of 1 if there is no light at all.
func inverseOf(normal mat.Matrix, fluxes int) (*mat.Dense, bool) {
	n, _ := normal.Dims()
	m := mat.DenseCopyOf(normal)
	for a := range n {
		if a >= fluxes || m.At(a, a) == 0 {
			m.Set(a, a, m.At(a, a)+1)
		}
	}
	var inverse mat.Dense
	if err := inverse.Inverse(m); err != nil && !isCondition(err) {
		return nil, false
	}
	return &inverse, true
}

// slope is the rms over the frames of the throughput's slope over the band, from the
// chunks, beyond its error, with that error.
func (r *sentinelResult) slope() (rms, sigma float64) {
	if len(r.chunks) == 0 {
		return 0, 0
	}
	var square, variance float64
	frames := len(r.c.c)
	for k := range frames {
		var w, wx, wxx, wy, wxy float64
		for c := range sentinelChunks {
			e := r.chunkErr[c][k]
			if !(e > 0) {
				continue
			}
			x, weight := (float64(c)+0.5)/sentinelChunks-0.5, 1/(e*e)
			w, wx, wxx = w+weight, wx+weight*x, wxx+weight*x*x
			wy, wxy = wy+weight*r.chunks[c][k], wxy+weight*x*r.chunks[c][k]
		}
		if det := w*wxx - wx*wx; det > 0 {
			b := (w*wxy - wx*wy) / det
			square += b * b / float64(frames)
			variance += w / det / float64(frames)
		}
	}
	return math.Sqrt(max(0, square-variance)), math.Sqrt(variance)
}

// image sums up the motions, and the slope of the flux over the band.
func (r *sentinelResult) image() *product.ImageMotion {
	measured := func(a int) product.Measured {
		square, mean := 0.0, 0.0
		n := float64(len(r.moves[a]))
		for _, x := range r.moves[a] {
			mean += x / n
			square += x * x / n
		}
		return product.Measured{Value: math.Sqrt(max(0, square-mean*mean)), Error: r.movesErr[a]}
	}
	slope, sigma := r.slope()
	return &product.ImageMotion{XPx: measured(moveX), YPx: measured(moveY), FWHMPart: measured(widen), Slope: product.Measured{Value: slope, Error: sigma}}
}
