package reduce

import (
	"context"

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
	e := newExposure(r.camera.Columns, r.camera.Rows)
	if err := r.lampRows(e, f, m, dim, 0, r.camera.Rows, s); err != nil {
		return nil, err
	}
	r.lookAt(1)
	return e, nil
}

func newExposure(columns, rows int) *calib.Exposure {
	n := columns * rows
	return &calib.Exposure{Columns: columns, Signal: make([]float32, n), Variance: make([]float32, n), Flags: make([]calib.Flag, n)}
}

// lampRows fills e with rows y0..y1-1 of a frame, as lampExposure does.
func (r *reduction) lampRows(e *calib.Exposure, f *exposure.Frame, m *wholeMasters, dim bool, y0, y1 int, s *exposure.Scratch) error {
	columns := r.camera.Columns
	from := y0 * columns
	copy(e.Flags, m.bad[from:y1*columns])
	mark := func(flags []calib.Flag, x, y, w int) { r.camera.Merge(e.Flags, y0, flags, x, y, w) }
	if _, err := r.camera.Read(e.Signal, f.Image, y0, y1, s, mark); err != nil {
		return err
	}
	seconds := float32(r.seq.Steps[f.Step].ExptimeSeconds)
	photon := float32(1 + r.camera.PhotonExcess)
	for y := y0; y < y1; y++ {
		at := y * columns
		quiet, bias, dark, lampOff := r.camera.Variance[y], m.bias[at:][:columns], m.dark[at:][:columns], m.lampOff[at:][:columns]
		signal, variance := e.Signal[at-from:][:columns], e.Variance[at-from:][:columns]
		for x, v := range signal {
			v -= bias[x]
			variance[x] = float32(quiet[x]) + photon*max(0, v)
			v -= seconds * dark[x]
			if dim {
				v -= seconds * lampOff[x]
			}
			signal[x] = v
		}
	}
	return r.album.Done(f)
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

// sumRows is how many rows of frames are added up at a time: they stay in the cache.
const sumRows = 128

// sumExposures adds frames up, in their order, whatever the number of workers:
// each takes rows of its own. dim as in lampExposure.
func (r *reduction) sumExposures(ctx context.Context, frames []*exposure.Frame, m *wholeMasters, dim bool) (*calib.Exposure, error) {
	columns, rows := r.camera.Columns, r.camera.Rows
	sum := newExposure(columns, rows)
	copy(sum.Flags, m.bad)
	h := max(1, min(sumRows, (rows+r.opts.Workers-1)/r.opts.Workers))
	scratch, part := make([]exposure.Scratch, r.opts.Workers), make([]*calib.Exposure, r.opts.Workers)
	err := parallel.Do(ctx, r.opts.Workers, (rows+h-1)/h, func(worker, i int) error {
		if part[worker] == nil {
			part[worker] = newExposure(columns, h)
		}
		e, y0, y1 := part[worker], i*h, min((i+1)*h, rows)
		for _, f := range frames {
			if err := ctx.Err(); err != nil {
				return err
			}
			if err := r.lampRows(e, f, m, dim, y0, y1, &scratch[worker]); err != nil {
				return err
			}
			signal, variance, flags := sum.Signal[y0*columns:y1*columns], sum.Variance[y0*columns:y1*columns], sum.Flags[y0*columns:y1*columns]
			for i := range signal {
				signal[i] += e.Signal[i]
				variance[i] += e.Variance[i]
				flags[i] |= e.Flags[i]
			}
		}
		return nil
	})
	if err != nil {
		return nil, err
	}
	r.lookAt(len(frames))
	return sum, nil
}
