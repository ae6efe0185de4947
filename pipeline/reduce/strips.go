package reduce

import (
	"context"
	"sync"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

// sweep is the second stage: once through the detector, from frames to cube.
type sweep struct {
	shape   shape
	heights heights
	reader  *stripReader
	decoder *decoder
	rectify *rectifier // nil without a cube
	// sink takes each strip of the cube; the strip is used again afterwards.
	sink     func(ctx context.Context, out *outStrip) error
	elements *fitsutil.Cube // nil without an element cube
	// pixel is the pixels' response, nil for 1. light, where not nil, sees the
	// decoded rows, in order, before bad pixels are filled.
	pixel *calib.PixelResponse
	light func(ctx context.Context, rows []*decodedRow, workers int) error
	// stuck puts in the light of mirrors that do not move; nil where all move.
	stuck *stuckLight
	// pixelVariance, where not nil, takes each row's variances, in order, when they
	// are what voxels are made of.
	pixelVariance func(row *decodedRow) error
	workers       int
	progress      func(rows int)
	// before is how far an earlier sweep came, whose sums begin gives back to this one;
	// nothing for a sweep from the start. boundary, where not nil, is called after each strip.
	before   extent
	boundary func(decoded int) error

	window  *window
	scratch []*decodeWorker
	fills   []calib.Fill
	planes  *elementPlanes // nil without an element cube
	outs    *outQueue      // nil without a cube
	nextOut int            // the next trace row to write
	// finished is the first row that is not yet fit for rectifying.
	finished int
	quality  []rowQuality
	samples  restoredSamples
	steps    stepChi2
}

// loaded is a strip that was read, or why it was not.
type loaded struct {
	strip *strip
	err   error
}

// run goes through all strips: one is worked on while the next is read and what was made
// of the last is written.
func (w *sweep) run(ctx context.Context) error {
	w.begin()
	ctx, cancel := context.WithCancel(ctx)
	var reader sync.WaitGroup
	defer reader.Wait()
	defer cancel()
	if w.rectify != nil {
		w.outs = newOutQueue(ctx, w.shape, w.heights.out, w.sink)
		defer w.outs.close()
	}
	free, ready := make(chan *strip, 2), make(chan loaded)
	for range cap(free) {
		free <- w.shape.newStrip(w.heights.strip)
	}
	reader.Go(func() { w.read(ctx, free, ready) })
	for _, rows := range w.spans() {
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
		w.progress(rows[1])
	}
	if w.outs != nil {
		return w.outs.close()
	}
	return nil
}

func (w *sweep) begin() {
	if w.quality == nil {
		w.clear()
	}
	w.window = newWindow(w.shape)
	w.finished, w.nextOut = w.firstAgain(), w.before.nextOut
	w.fills = make([]calib.Fill, w.workers)
	for range w.workers {
		w.scratch = append(w.scratch, w.decoder.newWorker())
	}
	if w.rectify != nil {
		w.rectify.scaled, w.rectify.byElement = w.decoder.scales(), w.decoder.repair.elementRatios()
	}
	if w.elements != nil {
		w.planes = w.newPlanes()
	}
}

// clear empties the sums.
func (w *sweep) clear() {
	w.quality, w.samples, w.steps = make([]rowQuality, w.shape.rows), restoredSamples{}, newStepChi2(w.shape.slots)
}

// read fills free strips in order and hands them on, until ctx ends.
func (w *sweep) read(ctx context.Context, free <-chan *strip, ready chan<- loaded) {
	for _, rows := range w.spans() {
		var s *strip
		select {
		case s = <-free:
		case <-ctx.Done():
			return
		}
		err := w.reader.read(ctx, s, rows[0], rows[1])
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
	if w.elements != nil && !w.isAgain(s.y0) {
		if f := w.decoder.lostFlag(); f != 0 {
			for i := range s.flags {
				s.flags[i] |= f
			}
		}
		if err := s.writePlanes(w.elements); err != nil {
			return err
		}
	}
	if w.rectify == nil {
		w.window.dropBefore(s.y1)
		return w.bound(s)
	}
	for {
		n := min(w.rectify.ready(w.nextOut, w.finished), w.heights.out)
		// Short strips are written only at the end: see planeRun.
		if n == 0 || n < w.heights.out && s.y1 < w.shape.rows {
			break
		}
		if err := w.emit(ctx, n); err != nil {
			return err
		}
	}
	w.window.dropBefore(min(w.rectify.needs(w.nextOut), w.finished-max(1, w.ahead())))
	return w.bound(s)
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
	if err := w.decodeBlocks(ctx, s, rows); err != nil {
		return err
	}
	err := parallel.Do(ctx, w.workers, len(rows), func(_, i int) error {
		w.flatten(rows[i], s)
		return nil
	})
	if err != nil {
		return err
	}
	if w.light != nil {
		if err := w.light(ctx, rows, w.workers); err != nil {
			return err
		}
	}
	return w.finish(ctx, s.y1)
}

// decodeBlocks is decode up to the rows' figures, which it adds up in their order.
func (w *sweep) decodeBlocks(ctx context.Context, s *strip, rows []*decodedRow) error {
	blocks := w.decoder.blocks()
	all := make([]blockQuality, len(rows)*blocks)
	if w.decoder.repair != nil {
		steps := make([]float64, len(all)*w.shape.slots)
		for i := range all {
			all[i].steps = steps[i*w.shape.slots : (i+1)*w.shape.slots]
		}
	}
	err := parallel.Do(ctx, w.workers, len(all), func(worker, i int) error {
		row := rows[i/blocks]
		w.decoder.run(w.scratch[worker], s, row.y, i%blocks, row, &all[i])
		return nil
	})
	if err != nil {
		return err
	}
	for i, b := range all {
		q := &w.quality[rows[i/blocks].y]
		q.dark.add(b.dark)
		q.pulls.add(b.pulls)
		q.restored += b.restored
		q.hits += b.hits
		q.doubtful += b.doubtful
		if !w.isAgain(rows[i/blocks].y) {
			w.samples.add(b.samples)
			w.steps.add(b)
		}
	}
	return nil
}

// finish makes rows fit for rectifying, up to row next: flags of saturated pixels
// spread to the neighbours in their column, into which a full pixel's charge
// bleeds, and bad pixels get harmless values. The last row of a strip waits for
// the next one.
func (w *sweep) finish(ctx context.Context, next int) error {
	if w.rectify == nil {
		return nil
	}
	if next < w.shape.rows {
		next -= max(1, w.ahead())
	}
	if next <= w.finished {
		return nil
	}
	first, n := w.window.first(), next-w.finished
	if err := w.putLight(ctx, next); err != nil {
		return err
	}
	err := parallel.Do(ctx, w.workers, n, func(worker, i int) error {
		at := w.finished + i - first
		row := w.window.rows[at]
		for _, near := range []int{at - 1, at + 1} {
			// Where samples are restored, bled ones count among the struck.
			if near >= 0 && near < len(w.window.rows) && w.decoder.repair == nil {
				spread(row.flags, w.window.rows[near].own)
			}
		}
		w.fill(&w.fills[worker], row)
		return nil
	})
	if err != nil {
		return err
	}
	if w.pixelVariance != nil {
		for _, row := range w.window.rows[w.finished-first:][:n] {
			if row.y < w.before.finished {
				continue // an earlier sweep did it
			}
			if err := w.pixelVariance(row); err != nil {
				return err
			}
		}
	}
	w.finished = next
	return nil
}

// ahead is how many rows beyond a row its light is put in from.
func (w *sweep) ahead() int {
	if w.stuck == nil {
		return 0
	}
	return lightRows
}

// putLight gives elements whose mirrors do not move their light back, in the rows up to
// next that are yet to be finished.
func (w *sweep) putLight(ctx context.Context, next int) error {
	if w.stuck == nil {
		return nil
	}
	type place struct{ row, slot, element int }
	var all []place
	first := w.window.first()
	for y := w.finished; y < next; y++ {
		list := w.stuck.affected(y)
		w.window.rows[y-first].whole = make([]wholeElement, len(list))
		for i, j := range list {
			all = append(all, place{y, i, j})
		}
	}
	return parallel.Do(ctx, w.workers, len(all), func(_, i int) error {
		p := all[i]
		w.window.rows[p.row-first].whole[p.slot] = w.stuck.restore(w.window, p.row, p.element)
		return nil
	})
}

// spread takes over the saturation of a neighbouring row.
func spread(flags, neighbour []calib.Flag) {
	for x, f := range neighbour {
		flags[x] |= f & calib.Saturated
	}
}

// flatten divides a row by the response of its pixels. What the response's own
// error adds depends on each element's light: the rectifier adds it. It also takes
// stock of the row's flags. Before, it takes off the pedestal and measures the error
// scale.
func (w *sweep) flatten(row *decodedRow, s *strip) {
	w.decoder.takePedestal(row, s)
	w.decoder.scaleErrors(row)
	w.quality[row.y].scale = newRowScale(row)
	if w.pixel != nil {
		w.dividePixels(row)
	}
	q := &w.quality[row.y]
	for _, b := range row.flags {
		if b&calib.Saturated != 0 {
			q.saturated++
		}
	}
	copy(row.own, row.flags)
}

func (w *sweep) dividePixels(row *decodedRow) {
	for _, r := range row.signal {
		w.pixel.Divide(r, nil, row.y*w.shape.columns)
	}
	factor, _, flags := w.pixel.Row(row.y)
	for _, r := range row.variance {
		for x, f := range factor {
			r[x] /= f * f
		}
	}
	for x, f := range factor {
		row.common[x] /= f * f
		row.pixel[x] /= f * f
	}
	for x, f := range flags {
		row.flags[x] |= f
	}
}

func (w *sweep) fill(f *calib.Fill, row *decodedRow) {
	f.Plan(row.flags, calib.BadPixel|calib.Saturated)
	for _, r := range row.signal {
		f.Signal(r)
	}
	for _, r := range row.whole {
		f.Signal(r.signal)
		f.Variance(r.extra)
	}
	for _, r := range row.variance {
		f.Variance(r)
	}
	f.Variance(row.common)
	f.Variance(row.pixel)
	// From here on the scales are those of variances, as the rectifier takes them.
	for x, v := range row.variance[0] {
		row.scale[x] *= v
		row.applied[x] *= v
		row.coherent[x] *= v
	}
}

// emit makes and writes the next n trace rows of the cube.
func (w *sweep) emit(ctx context.Context, n int) error {
	out, err := w.outs.take(ctx)
	if err != nil {
		return err
	}
	out.begin(w.shape, w.nextOut, n)
	if err := w.rectify.run(ctx, out, w.window); err != nil {
		return err
	}
	if lost := w.decoder.lostFlag(); lost != 0 {
		for i, f := range out.flags {
			if f&product.FlagNoData == 0 {
				out.flags[i] |= lost
			}
		}
	}
	w.outs.give(out)
	w.nextOut += n
	return nil
}
