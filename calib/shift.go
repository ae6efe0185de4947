package calib

import (
	"fmt"
	"math"
	"sort"
)

// RowShift straightens traces: for a trace row y0 it gathers, in each column x, the
// light between y0 - 0.5 + t(x) and y0 + 0.5 + t(x). The running sum along the
// column is interpolated as in Resampler; for a height of exactly one pixel the
// weights are the interpolant's own, on eight rows. They are computed once for the
// detector, so that a row costs eight multiply-adds a pixel. Immutable: any number
// of goroutines may share it.
//
// Rows near the detector's lower and upper end use one-sided stencils. Nothing is
// known beyond the ends: the running sum is flat there, the pixel's coverage
// falls, and Flags says so.
type RowShift struct {
	columns, rows int
	plans         []*rowPlan // by y0; all inner rows share one
}

// A rowPlan holds the weights of one trace row.
type rowPlan struct {
	weights     []float32 // [column][points]
	runs        []run
	cover       []Flag // per column: Partial, NoData; nil when all is covered
	covers      []Flag // its memory
	first, last int    // rows read, relative to y0, inclusive
}

// A run is a range of columns x0..x1-1 whose weights begin at the same row,
// relative to y0.
type run struct{ x0, x1, row int }

// NewRowShift plans for shift[x] = t(x), in rows, on a detector of len(shift)
// columns and at least 8 rows. shift is not kept.
func NewRowShift(shift []float64, rows int) (*RowShift, error) {
	if rows < points {
		return nil, fmt.Errorf("resampling: %d rows are fewer than the %d that interpolation needs; check the detector's size", rows, points)
	}
	low, high := math.Inf(1), math.Inf(-1)
	for x, t := range shift {
		if math.IsNaN(t) || math.IsInf(t, 0) {
			return nil, fmt.Errorf("resampling: the trace's shift at column %d is not a finite number; check the geometry", x)
		}
		low, high = min(low, t), max(high, t)
	}
	s := &RowShift{columns: len(shift), rows: rows, plans: make([]*rowPlan, rows)}
	column := stencil{size: rows, table: tails()}
	var inner *rowPlan
	for y0 := range s.plans {
		if y0+int(math.Floor(low)) >= middle && y0+int(math.Floor(high)) < rows-points+middle {
			if inner == nil {
				inner = column.plan(shift, y0)
			}
			s.plans[y0] = inner
			continue
		}
		s.plans[y0] = column.plan(shift, y0)
	}
	return s, nil
}

// plan computes the weights of trace row y0.
func (s *stencil) plan(shift []float64, y0 int) *rowPlan {
	p := &rowPlan{}
	p.set(s, y0, 0, len(shift), shift)
	return p
}

// set computes the weights of columns x0.. of trace row y0 of a detector of so many
// columns; shift holds theirs.
func (p *rowPlan) set(s *stencil, y0, x0, columns int, shift []float64) {
	p.first, p.last, p.runs = math.MaxInt, math.MinInt, p.runs[:0]
	if len(p.weights) != columns*points {
		p.weights, p.covers = make([]float32, columns*points), make([]Flag, columns)
	}
	p.cover = nil
	low, high := newEdge(), newEdge()
	for i, t := range shift {
		x := x0 + i
		s.set(&low, float64(y0)-0.5+t)
		s.set(&high, float64(y0)+0.5+t)
		start := min(low.base, s.size-points)
		w := p.weights[x*points:][:points]
		for i := range w {
			w[i] = high.tails[pad+start-high.base+i] - low.tails[pad+start-low.base+i]
		}
		p.covers[x] = 0
		switch c := high.place - low.place; {
		case c < halfCover:
			p.covers[x] = NoData | Partial
		case c < fullCover:
			p.covers[x] = Partial
		}
		if p.covers[x] != 0 {
			p.cover = p.covers
		}
		p.add(x, start-y0)
	}
}

// add appends column x, whose weights begin at row, to the runs.
func (p *rowPlan) add(x, row int) {
	p.first, p.last = min(p.first, row), max(p.last, row+points-1)
	if n := len(p.runs); n > 0 && p.runs[n-1].row == row && p.runs[n-1].x1 == x {
		p.runs[n-1].x1 = x + 1
		return
	}
	p.runs = append(p.runs, run{x, x + 1, row})
}

// Span is the range of detector rows, inclusive, that trace row y0 reads.
func (s *RowShift) Span(y0 int) (first, last int) {
	p := s.plans[y0]
	if len(p.runs) == 0 {
		return y0, y0 - 1
	}
	return y0 + p.first, y0 + p.last
}

// Weights gives the weights with which column x of trace row y0 gathers the detector
// rows first, first+1, ... The slice is not to be changed.
func (s *RowShift) Weights(y0, x int) (first int, w []float32) {
	return s.plans[y0].at(y0, x)
}

func (p *rowPlan) at(y0, x int) (first int, w []float32) {
	at := sort.Search(len(p.runs), func(i int) bool { return p.runs[i].x1 > x })
	return y0 + p.runs[at].row, p.weights[x*points:][:points]
}

// Signal writes trace row y0 to dst, one value a column: sum w v. rows[i] is
// detector row first+i; all of Span(y0) must be among them.
func (s *RowShift) Signal(dst []float32, rows [][]float32, first, y0 int) {
	s.plans[y0].signal(dst, rows, y0-first, 0, s.columns)
}

// SignalWithin is Signal for columns x0..x1-1 alone: the others of dst stay as they are.
func (s *RowShift) SignalWithin(dst []float32, rows [][]float32, first, y0, x0, x1 int) {
	s.plans[y0].signal(dst, rows, y0-first, x0, x1)
}

// signal takes columns x0..x1-1 of trace row y0 from rows of which the first is row
// y0 - below.
func (p *rowPlan) signal(dst []float32, rows [][]float32, below, x0, x1 int) {
	for _, r := range p.runs {
		r.x0, r.x1 = max(r.x0, x0), min(r.x1, x1)
		if r.x0 >= r.x1 {
			continue
		}
		out := dst[r.x0:r.x1]
		q := window(rows, below+r.row, r)
		w := p.weights[r.x0*points:]
		for x := range out {
			u := w[x*points:][:points]
			out[x] = u[0]*q[0][x] + u[1]*q[1][x] + u[2]*q[2][x] + u[3]*q[3][x] +
				u[4]*q[4][x] + u[5]*q[5][x] + u[6]*q[6][x] + u[7]*q[7][x]
		}
	}
}

// Variance is Signal for variances: sum w^2 var.
func (s *RowShift) Variance(dst []float32, rows [][]float32, first, y0 int) {
	s.plans[y0].variance(dst, rows, y0-first)
}

func (p *rowPlan) variance(dst []float32, rows [][]float32, below int) {
	for _, r := range p.runs {
		out := dst[r.x0:r.x1]
		q := window(rows, below+r.row, r)
		w := p.weights[r.x0*points:]
		for x := range out {
			u := w[x*points:][:points]
			out[x] = u[0]*u[0]*q[0][x] + u[1]*u[1]*q[1][x] + u[2]*u[2]*q[2][x] + u[3]*u[3]*q[3][x] +
				u[4]*u[4]*q[4][x] + u[5]*u[5]*q[5][x] + u[6]*u[6]*q[6][x] + u[7]*u[7]*q[7][x]
		}
	}
}

// window cuts the eight rows of a run, the first of which is rows[at].
func window(rows [][]float32, at int, r run) [points][]float32 {
	var q [points][]float32
	for i := range q {
		q[i] = rows[at+i][r.x0:r.x1]
	}
	return q
}

// Flags gathers the flags of trace row y0: those of pixels that reach it with more
// than 0.1, and Partial (below 99 %) and NoData (below 50 %) where the trace leaves
// the detector. Where several flagged pixels of a column reach, their weights add
// up: a column that is bad in every row reaches its trace rows whole.
func (s *RowShift) Flags(dst *RowFlags, rows [][]Flag, first, y0 int) {
	dst.resize(s.columns)
	s.plans[y0].flags(dst, rows, y0-first)
}

// flags fills dst, which has the detector's columns, where the plan has weights.
func (p *rowPlan) flags(dst *RowFlags, rows [][]Flag, below int) {
	for _, r := range p.runs {
		for x := r.x0; x < r.x1; x++ {
			w := p.weights[x*points:][:points]
			dst.Bits[x], dst.Reach[x] = reach(w, rows[below+r.row:], x)
		}
	}
	for _, r := range p.runs {
		for x := r.x0; x < r.x1 && p.cover != nil; x++ {
			if c := p.cover[x]; c != 0 {
				dst.Bits[x] |= c
				dst.Reach[x] = 1
			}
		}
	}
	dst.count()
}

func reach(w []float32, rows [][]Flag, x int) (bits Flag, reach float32) {
	var sum, most float32
	for i, u := range w {
		b := rows[i][x]
		if b == 0 {
			continue
		}
		sum += u
		size := max(u, -u)
		if size > reachLimit {
			bits |= b
		}
		most = max(most, size)
	}
	if bits == 0 {
		return 0, 0
	}
	return bits, max(most, sum, -sum)
}
