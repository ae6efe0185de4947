package reduce

import (
	"context"
	"sync"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
)

// exposureBytes is the memory of a pixel of a calib.Exposure, or of a
// calib.PixelResponse: two floats and flags.
const exposureBytes = 2*bytesFloat + 2

// wholeMasters are the masters over the whole detector, for frames that are
// looked at as a whole: lamps.
type wholeMasters struct {
	bias, dark, lampOff []float32
	bad                 []calib.Flag
}

func (m *masters) whole(rows, columns int) (*wholeMasters, error) {
	n := rows * columns
	w := &wholeMasters{bias: make([]float32, n), dark: make([]float32, n), lampOff: make([]float32, n), bad: make([]calib.Flag, n)}
	bad := make([]float32, n)
	for i, dst := range map[int][]float32{masterBias: w.bias, masterDark: w.dark, masterLampOff: w.lampOff, masterBad: bad} {
		if err := m.images[i].ReadRows(dst, 0, rows); err != nil {
			return nil, err
		}
	}
	for i, f := range bad {
		w.bad[i] = calib.Flag(f)
	}
	return w, nil
}

// lampExposure reads a frame whole, less bias and dark current, and less what the
// lamp gives without any open mirror if dim is set.
func (r *reduction) lampExposure(f *exposure.Frame, m *wholeMasters, dim bool, s *exposure.Scratch) (*calib.Exposure, error) {
	columns, rows := r.camera.Columns, r.camera.Rows
	e := &calib.Exposure{Columns: columns, Signal: make([]float32, rows*columns), Variance: make([]float32, rows*columns), Flags: make([]calib.Flag, rows*columns)}
	copy(e.Flags, m.bad)
	var mu sync.Mutex
	mark := func(flags []calib.Flag, x, y, w int) {
		mu.Lock()
		defer mu.Unlock()
		r.camera.Merge(e.Flags, 0, flags, x, y, w)
	}
	if _, err := r.camera.Read(e.Signal, f.Image, 0, rows, s, mark); err != nil {
		return nil, err
	}
	if err := r.album.Done(f); err != nil {
		return nil, err
	}
	r.lookAt(1)
	seconds := float32(r.seq.Steps[f.Step].ExptimeSeconds)
	photon := float32(1 + r.camera.PhotonExcess)
	for y := range rows {
		quiet := r.camera.Variance[y]
		for x := range columns {
			i := y*columns + x
			v := e.Signal[i] - m.bias[i]
			e.Variance[i] = float32(quiet[x]) + photon*max(0, v)
			v -= seconds * m.dark[i]
			if dim {
				v -= seconds * m.lampOff[i]
			}
			e.Signal[i] = v
		}
	}
	return e, nil
}

// wholeWorkers is how many whole exposures the memory holds at the same time,
// with the masters and what a search in them takes.
func (r *reduction) wholeWorkers() int {
	const planes = 16 // of float32, for one exposure with its spectra
	bytes := int64(planes) * bytesFloat * int64(r.camera.Columns) * int64(r.camera.Rows)
	return max(1, min(r.opts.Workers, int((r.opts.MemoryBytes-runtimeBytes)/2/bytes)))
}

// eachExposure reads frames whole and hands them to look, several at a time.
func (r *reduction) eachExposure(ctx context.Context, frames []*exposure.Frame, m *wholeMasters, dim bool, look func(i int, e *calib.Exposure) error) error {
	workers := r.wholeWorkers()
	scratch := make([]exposure.Scratch, workers)
	return parallel.Do(ctx, workers, len(frames), func(worker, i int) error {
		e, err := r.lampExposure(frames[i], m, dim, &scratch[worker])
		if err != nil {
			return err
		}
		return look(i, e)
	})
}

// sumExposures adds frames up, in their order, whatever the number of workers:
// each takes rows of its own. dim as in lampExposure.
func (r *reduction) sumExposures(ctx context.Context, frames []*exposure.Frame, m *wholeMasters, dim bool) (*calib.Exposure, error) {
	columns, rows := r.camera.Columns, r.camera.Rows
	n := columns * rows
	sum := &calib.Exposure{Columns: columns, Signal: make([]float32, n), Variance: make([]float32, n), Flags: make([]calib.Flag, n)}
	copy(sum.Flags, m.bad)
	for _, f := range frames {
		e, err := r.lampExposure(f, m, dim, new(exposure.Scratch))
		if err != nil {
			return nil, err
		}
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		for i, v := range e.Signal {
			sum.Signal[i] += v
			sum.Variance[i] += e.Variance[i]
			sum.Flags[i] |= e.Flags[i]
		}
	}
	return sum, nil
}
