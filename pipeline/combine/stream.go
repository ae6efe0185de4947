package combine

import (
	"context"
	"fmt"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

// stream makes the voxels of the combined cube, wavelength by wavelength, in pieces of so
// many rows that the workers' buffers fit the memory. No result depends on the pieces.
type stream struct {
	members        []*member
	elements, rows int
	planes         int
	out            *fitsutil.Cube
	pieceRows      int
	workers        []*worker

	good    int64
	flagged [16]int64 // voxels by bit of FLAGS
	// light is, by member and row, what it shares with the first: see shared.
	light [][]shared
}

// shared sums up the voxels that are good in a run and in the first one.
type shared struct{ own, first, ownVariance, firstVariance float64 }

func (s *shared) add(o shared) {
	s.own += o.own
	s.first += o.first
	s.ownVariance += o.ownVariance
	s.firstVariance += o.firstVariance
}

// ratio is the run's light over the first one's, with its standard error for independent
// voxels; 0 where they share none.
func (s shared) ratio() (ratio, sigma float64) {
	if s.first == 0 {
		return 0, 0
	}
	ratio = s.own / s.first
	return ratio, math.Sqrt(s.ownVariance+ratio*ratio*s.firstVariance) / math.Abs(s.first)
}

// worker holds the buffers of a goroutine, of a piece each.
type worker struct {
	sum *voxels
	// in are SIGNAL, VARIANCE, FLAGS and SCALE of a run, first those of the first run.
	in, first [4][]float32
	// Of the result.
	signal, variance, scale []float32
	flags                   []int16
	good                    int64
	flagged                 [16]int64
}

// bytesVoxel is what a worker holds of a voxel of a piece: sums, input twice, result.
const bytesVoxel = 1 + 2 + 3*8 + 2*4*4 + 3*4 + 2

// runtimeBytes is what the program takes besides: code, headers, tables.
const runtimeBytes = 48 << 20

func newStream(members []*member, elements, rows int, memory int64, workers int) (*stream, error) {
	s := &stream{members: members, elements: elements, rows: rows, planes: members[0].schema.Grid.Count}
	perRow := int64(bytesVoxel*elements + 32*len(members))
	fit := (memory - runtimeBytes) / perRow
	if fit < 1 {
		return nil, fmt.Errorf("--memory of %d MiB is too little; give at least %d MiB", memory>>20, (runtimeBytes+perRow)>>20+1)
	}
	workers = int(min(int64(workers), fit))
	s.pieceRows = int(min(fit/int64(workers), int64((rows+workers-1)/workers)))
	s.light = make([][]shared, len(members))
	for i := range s.light {
		s.light[i] = make([]shared, rows)
	}
	for range workers {
		s.workers = append(s.workers, s.newWorker())
	}
	return s, nil
}

func (s *stream) newWorker() *worker {
	n := s.elements * s.pieceRows
	w := &worker{
		sum:    newVoxels(s.elements, s.pieceRows),
		signal: make([]float32, n), variance: make([]float32, n), scale: make([]float32, n), flags: make([]int16, n),
	}
	for i := range w.in {
		w.in[i], w.first[i] = make([]float32, n), make([]float32, n)
	}
	return w
}

// run writes all images.
func (s *stream) run(ctx context.Context, progress func(done, total int)) error {
	pieces := (s.rows + s.pieceRows - 1) / s.pieceRows
	for l := range s.planes {
		err := parallel.Do(ctx, len(s.workers), pieces, func(worker, i int) error {
			y0 := i * s.pieceRows
			return s.piece(s.workers[worker], l, y0, min(y0+s.pieceRows, s.rows))
		})
		if err != nil {
			return err
		}
		progress(l+1, s.planes)
	}
	for _, w := range s.workers {
		s.good += w.good
		for b, n := range w.flagged {
			s.flagged[b] += n
		}
	}
	return nil
}

// piece makes the rows y0 to y1-1 of plane l.
func (s *stream) piece(w *worker, l, y0, y1 int) error {
	n := s.elements * (y1 - y0)
	w.sum.reset(n)
	for k, m := range s.members {
		from, to := max(y0, m.row), min(y1, m.row+m.height())
		if from >= to {
			continue
		}
		into := &w.in
		if k == 0 {
			into = &w.first
		}
		size := (to - from) * m.width()
		for i, im := range m.images {
			if err := im.ReadPlaneRows(into[i][:size], l, from-m.row, to-m.row); err != nil {
				return err
			}
		}
		s.take(w, k, from, to, y0)
	}
	for i := range n {
		w.sum.result(i, w.signal, w.variance, w.flags, w.scale)
		w.count(w.flags[i])
	}
	for image, data := range []any{w.signal[:n], w.variance[:n], w.flags[:n], w.scale[:n]} {
		if err := s.out.WriteStrip(image, y0, y1-y0, l, 1, data); err != nil {
			return err
		}
	}
	return nil
}

// take adds the rows from..to-1 of a member, read into the worker's buffers, to the piece
// that begins at row y0.
func (s *stream) take(w *worker, k, from, to, y0 int) {
	m, in := s.members[k], &w.in
	if k == 0 {
		in = &w.first
	}
	for y := from; y < to; y++ {
		at := (y - from) * m.width()
		for j := range m.width() {
			w.sum.add((y-y0)*s.elements+m.element+j, in[0][at+j], in[1][at+j], int16(in[2][at+j]), in[3][at+j])
		}
		if k > 0 {
			s.light[k][y].add(w.shared(m, s.members[0], y, from, y0))
		}
	}
}

// shared compares a row of a member with the same row of the first one.
func (w *worker) shared(m, first *member, y, from, y0 int) (sum shared) {
	begin := max(y0, first.row) // row of the combined cube that w.first begins with
	if y < begin || y >= first.row+first.height() {
		return sum
	}
	at, other := (y-from)*m.width(), (y-begin)*first.width()
	for j := max(m.element, first.element); j < min(m.element+m.width(), first.element+first.width()); j++ {
		a, b := at+j-m.element, other+j-first.element
		if rank(int16(w.in[2][a]), w.in[0][a], w.in[1][a]) == goodLight && rank(int16(w.first[2][b]), w.first[0][b], w.first[1][b]) == goodLight {
			sum.own += float64(w.in[0][a])
			sum.first += float64(w.first[0][b])
			sum.ownVariance += float64(w.in[1][a])
			sum.firstVariance += float64(w.first[1][b])
		}
	}
	return sum
}

func (w *worker) count(flags int16) {
	if flags&product.FlagBad == 0 {
		w.good++
	}
	for b := range w.flagged {
		if flags>>b&1 != 0 {
			w.flagged[b]++
		}
	}
}
