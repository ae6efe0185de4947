package reduce

import (
	"context"
	"sync"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// sweep is the second stage: once through the detector, from frames to cube.
type sweep struct {
	shape    shape
	heights  heights
	reader   *stripReader
	decoder  *decoder
	rectify  *rectifier     // nil without a cube
	cube     *fitsutil.Cube // nil without a cube
	elements *fitsutil.Cube // nil without an element cube
	workers  int
	progress func(rows int)

	window  *window
	scratch []*decodeWorker
	fills   []calib.Fill
	planes  *elementPlanes // nil without an element cube
	out     *outStrip
	nextOut int // the next trace row to write
	quality []rowQuality
}

// loaded is a strip that was read, or why it was not.
type loaded struct {
	strip *strip
	err   error
}

// run goes through all strips: one is worked on while the next is read.
func (w *sweep) run(ctx context.Context) error {
	w.begin()
	ctx, cancel := context.WithCancel(ctx)
	var reader sync.WaitGroup
	defer reader.Wait()
	defer cancel()
	free, ready := make(chan *strip, 2), make(chan loaded)
	for range cap(free) {
		free <- w.shape.newStrip(w.heights.strip)
	}
	reader.Go(func() { w.read(ctx, free, ready) })
	for y0 := 0; y0 < w.shape.rows; y0 += w.heights.strip {
		var l loaded
		select {
		case l = <-ready:
		case <-ctx.Done():
			return ctx.Err()
		}
		if l.err != nil {
			return l.err
		}
		if err := w.work(ctx, l.strip); err != nil {
			return err
		}
		free <- l.strip
		w.progress(min(y0+w.heights.strip, w.shape.rows))
	}
	return nil
}

func (w *sweep) begin() {
	w.window = newWindow(w.shape)
	w.quality = make([]rowQuality, w.shape.rows)
	w.fills = make([]calib.Fill, w.workers)
	for range w.workers {
		w.scratch = append(w.scratch, w.decoder.newWorker())
	}
	if w.cube != nil {
		w.out = w.shape.newOut(w.heights.out)
	}
	if w.elements != nil {
		w.planes = w.newPlanes()
	}
}

// read fills free strips in order and hands them on, until ctx ends.
func (w *sweep) read(ctx context.Context, free <-chan *strip, ready chan<- loaded) {
	for y0 := 0; y0 < w.shape.rows; y0 += w.heights.strip {
		var s *strip
		select {
		case s = <-free:
		case <-ctx.Done():
			return
		}
		err := w.reader.read(ctx, s, y0, min(y0+w.heights.strip, w.shape.rows))
		select {
		case ready <- loaded{s, err}:
		case <-ctx.Done():
			return
		}
		if err != nil {
			return
		}
	}
}

// work takes a strip through decoding, and what became complete by it to the
// cube.
func (w *sweep) work(ctx context.Context, s *strip) error {
	s.planes = w.planes
	rows := w.window.extend(s.y0, s.y1)
	if err := w.decode(ctx, s, rows); err != nil {
		return err
	}
	if w.elements != nil {
		if err := s.writePlanes(w.elements); err != nil {
			return err
		}
	}
	if w.cube == nil {
		w.window.dropBefore(s.y1)
		return nil
	}
	for {
		n := min(w.rectify.ready(w.nextOut, s.y1), w.heights.out)
		// Short strips are written only at the end: see planeRun.
		if n == 0 || n < w.heights.out && s.y1 < w.shape.rows {
			break
		}
		if err := w.emit(ctx, n); err != nil {
			return err
		}
	}
	w.window.dropBefore(w.rectify.needs(w.nextOut))
	return nil
}

func (w *sweep) newPlanes() *elementPlanes {
	n := w.heights.strip * w.shape.columns
	variances := 1
	if !w.shape.uniform {
		variances = w.shape.slots
	}
	return &elementPlanes{signal: planes(w.shape.slots, n), variance: planes(variances, n)}
}

// decode fills the rows of the window from the strip, block by block, and then
// puts harmless values into flagged pixels.
func (w *sweep) decode(ctx context.Context, s *strip, rows []*decodedRow) error {
	blocks := w.decoder.blocks()
	dark := make([]darkChi2, len(rows)*blocks)
	err := parallel(ctx, w.workers, len(dark), func(worker, i int) error {
		row := rows[i/blocks]
		dark[i] = w.decoder.run(w.scratch[worker], s, row.y, i%blocks, row)
		return nil
	})
	if err != nil {
		return err
	}
	for i, d := range dark {
		q := &w.quality[rows[i/blocks].y]
		q.dark.sum += d.sum
		q.dark.terms += d.terms
	}
	return parallel(ctx, w.workers, len(rows), func(worker, i int) error {
		w.fill(&w.fills[worker], rows[i])
		return nil
	})
}

func (w *sweep) fill(f *calib.Fill, row *decodedRow) {
	q := &w.quality[row.y]
	for _, b := range row.flags {
		if b&calib.Saturated != 0 {
			q.saturated++
		}
	}
	f.Plan(row.flags, calib.BadPixel|calib.Saturated)
	for _, r := range row.signal {
		f.Signal(r)
	}
	for _, r := range row.variance {
		f.Variance(r)
	}
}

// emit makes and writes the next n trace rows of the cube.
func (w *sweep) emit(ctx context.Context, n int) error {
	w.out.begin(w.shape, w.nextOut, n)
	if err := w.rectify.run(ctx, w.out, w.window); err != nil {
		return err
	}
	if len(w.decoder.lost) > 0 {
		for i, f := range w.out.flags {
			if f&product.FlagNoData == 0 {
				w.out.flags[i] |= product.FlagLost
			}
		}
	}
	for row := range n {
		y := w.nextOut + row
		w.quality[y].count(w.out, row, w.shape.elements, w.shape.voxels, w.rectify.usage.row(y))
	}
	if err := w.out.write(w.cube, w.shape.voxels); err != nil {
		return err
	}
	w.nextOut += n
	return nil
}
