package reduce

import (
	"context"
	"slices"
	"sync"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
)

// strip is some detector rows of all science frames, in electrons above the
// bias level, with what is to be taken off them.
type strip struct {
	y0, y1, columns int
	raw             []float32    // [slot][row][column]
	flags           []calib.Flag // [row][column]
	struck          []calib.Flag // what is wrong with the pixel's struck samples, 0 without any
	extra           []extraNoise // of stand-ins for struck samples, by pixel
	base            []float32    // bias and dark current of an exposure
	off             []float32    // all-off light to be taken off it
	level           []float32    // dark current and all-off light of an exposure
	levelVariance   []float32    // of base and off
	quiet           [][]float64  // [row][column] variance without light
	planes          *elementPlanes
	saturated       []int // pixels of each frame, see frameTally
}

// slot is the pixels of a code row.
func (s *strip) slot(i int) []float32 {
	n := (s.y1 - s.y0) * s.columns
	return s.raw[i*n : (i+1)*n]
}

// elementPlanes collects a strip of the element cube.
type elementPlanes struct {
	signal, variance [][]float32 // [code column][row*columns+column]; one variance plane where all are equal
}

// keep copies a decoded block into the element cube's strip, if there is one.
func (s *strip) keep(w *decodeWorker, at, n int, out *decodedRow, x0 int, uniform bool) {
	if s.planes == nil {
		return
	}
	for c, plane := range s.planes.signal {
		copy(plane[at:at+n], w.decoded[c*n:(c+1)*n])
	}
	if uniform {
		copy(s.planes.variance[0][at:at+n], out.variance[0][x0:x0+n])
		return
	}
	for c, plane := range s.planes.variance {
		copy(plane[at:at+n], w.variance[c*n:(c+1)*n])
	}
}

// stripReader fills strips from the science frames and the masters.
type stripReader struct {
	camera  *exposure.Camera
	album   *exposure.Album
	slots   [][]*exposure.Frame // by code row
	masters *masters
	// seconds is the exposure time of the frames, and dim the master of the light
	// that comes without any open mirror: masterOff or masterLampOff.
	seconds float64
	dim     int
	// correction is what is done to the frames; nil for nothing.
	correction *correction

	workers int
	scratch []exposure.Scratch
	sums    [][]float32 // by worker, for slots of several frames
	// restore: struck samples are marked one by one, rather than their pixel flagged.
	restore bool
	struck  [][]struckSample // by worker
	tally   frameTally
	// edges are struck samples to be replaced, nil where they are not looked for in single
	// frames; scale is how frames make samples.
	edges edgeHits
	scale *slotScale
}

// read fills s with rows y0..y1-1.
func (r *stripReader) read(ctx context.Context, s *strip, y0, y1 int) error {
	s.y0, s.y1, s.columns = y0, y1, r.camera.Columns
	n := (y1 - y0) * s.columns
	s.raw = s.raw[:len(r.slots)*n]
	s.quiet = r.camera.Variance[y0:y1]
	s.saturated = make([]int, len(r.tally.frames))
	if err := r.readMasters(s, n); err != nil {
		return err
	}
	var mu sync.Mutex
	merge := func(flags []calib.Flag, x, y, w int) {
		mu.Lock()
		defer mu.Unlock()
		r.camera.Merge(s.flags, y0, flags, x, y, w)
	}
	err := parallel.Do(ctx, r.workers, len(r.slots), func(worker, i int) error {
		for n, f := range r.slots[i] {
			if err := r.readFrame(s, i, n, f, worker, merge); err != nil {
				return err
			}
			r.strike(s, i, worker, &mu)
		}
		divide(s.slot(i), len(r.slots[i]))
		return nil
	})
	if err != nil {
		return err
	}
	return r.standIns(ctx, s)
}

// readFrame adds frame n of slot i, times its factor, to the slot.
func (r *stripReader) readFrame(s *strip, i, n int, f *exposure.Frame, worker int, merge exposure.Marked) error {
	dst := s.slot(i)
	into := dst
	if n > 0 {
		r.sums[worker] = slices.Grow(r.sums[worker][:0], len(dst))[:len(dst)]
		into = r.sums[worker]
	}
	mark := merge
	if r.restore {
		mark = r.collectStruck(s, worker)
	}
	saturated, err := r.camera.Read(into, f.Image, s.y0, s.y1, &r.scratch[worker], mark)
	if err != nil {
		return err
	}
	s.saturated[r.tally.at(i, n)] = saturated
	if r.restore {
		if err := r.nearby(s, f, worker, mark); err != nil {
			return err
		}
	}
	factor, _, _ := r.correction.of(f.Step)
	accumulate(dst, into, float32(factor), n == 0)
	return r.album.Done(f)
}

// divide makes a sum of so many frames their mean.
func divide(dst []float32, frames int) {
	if n := float32(frames); n > 1 {
		for p := range dst {
			dst[p] /= n
		}
	}
}

// accumulate adds factor times src to dst; first it is all of dst. The two may be the
// same memory.
func accumulate(dst, src []float32, factor float32, first bool) {
	switch {
	case !first:
		for p, v := range src {
			dst[p] += factor * v
		}
	case factor != 1 || &dst[0] != &src[0]:
		for p, v := range src {
			dst[p] = factor * v
		}
	}
}

func (r *stripReader) readMasters(s *strip, n int) error {
	s.base, s.off, s.level, s.levelVariance = s.base[:n], s.off[:n], s.level[:n], s.levelVariance[:n]
	s.flags, s.struck = s.flags[:n], s.struck[:n]
	clear(s.struck)
	for _, m := range []struct {
		master int
		dst    []float32
	}{{masterBad, s.off}, {masterDark, s.level}, {masterBias, s.base}, {masterVariance, s.levelVariance}} {
		if err := r.masters.images[m.master].ReadRows(m.dst, s.y0, s.y1); err != nil {
			return err
		}
	}
	for p, v := range s.off {
		s.flags[p] = calib.Flag(v)
	}
	if err := r.masters.images[r.dim].ReadRows(s.off, s.y0, s.y1); err != nil {
		return err
	}
	seconds, leak := float32(r.seconds), float32(r.correction.leakFactor())
	for p, rate := range s.level {
		dark, off := rate*seconds, s.off[p]*seconds*leak
		s.base[p] += dark
		s.off[p], s.level[p] = off, off+dark
	}
	return nil
}

// newStrip makes the memory of a strip of h rows.
func (s shape) newStrip(h int) *strip {
	n := h * s.columns
	st := &strip{
		raw: make([]float32, s.slots*n), flags: make([]calib.Flag, n), struck: make([]calib.Flag, n),
		base: make([]float32, n), off: make([]float32, n), level: make([]float32, n), levelVariance: make([]float32, n),
	}
	return st
}

// writePlanes writes a strip of the element cube.
func (s *strip) writePlanes(c *fitsutil.Cube) error {
	h := s.y1 - s.y0
	n := h * s.columns
	for i, plane := range s.planes.signal {
		if err := c.WriteStrip(0, s.y0, h, i, 1, plane[:n]); err != nil {
			return err
		}
		variance := s.planes.variance[min(i, len(s.planes.variance)-1)]
		if err := c.WriteStrip(1, s.y0, h, i, 1, variance[:n]); err != nil {
			return err
		}
		if err := c.WriteStrip(2, s.y0, h, i, 1, s.flags[:n]); err != nil {
			return err
		}
	}
	return nil
}
