package hadamard

import "sync"

// transform decodes an m-sequence. With u = stepIndex and w = columnIndex,
// 1-2W[i][j] = H[u[i]][w[j]], H the Sylvester matrix of order v+1, so
//
//	A y = -2/(v+1) H (y placed at u, 0 at 0), read at w.
//
// The transform runs over a block of v+1 rows in stages h = 1, 2, 4, ...: rows
// i and i+h become their sum and difference. Grouping three stages (radix 8)
// or two (radix 4) in one pass does not change the additions or their order,
// so that every schedule, and every instruction set, gives the same bits.
type transform struct {
	v       int
	steps   places
	columns places
	inverse float32 // 1/v
	passes  passes
	middle  []pass
	last    pass
	first8  bool
	scratch sync.Pool // *transformScratch
}

// places tells where the rows of a block stand in the transform.
type places struct {
	index []int32 // index[row] is the place, 1..v
	row   []int32 // row[place] is the row; row[0] is -1
	// last is row as the last pass takes the places: last[radix*i+t] is
	// row[i+t*h]. It ends with aheadPlaces that are looked at but not used.
	last []int32
}

// pass is one run over the block that does the stages h, 2h (, 4h).
type pass struct {
	radix int
	h     int
}

// transformScratch holds the v+1 rows in work, and one row for what has no
// place outside.
type transformScratch struct {
	rows    []row
	drop    row
	mean    row
	base    row
	residue [lanes]float64
}

func newTransform(c *Code, l level) *transform {
	degree := degreeOf(c.v)
	t := &transform{
		v:       c.v,
		steps:   placesOf(stepIndex(degree)),
		columns: placesOf(columnIndex(degree)),
		inverse: float32(1 / float64(c.v)),
		passes:  passesOf(l),
	}
	t.first8, t.middle, t.last = schedule(degree)
	t.steps.last = t.steps.orderOf(t.last)
	t.columns.last = t.columns.orderOf(t.last)
	t.scratch.New = func() any { return &transformScratch{rows: make([]row, c.v+1)} }
	return t
}

func placesOf(index []int) places {
	p := places{index: make([]int32, len(index)), row: make([]int32, len(index)+1)}
	p.row[0] = -1
	for i, at := range index {
		p.index[i] = int32(at)
		p.row[at] = int32(i)
	}
	return p
}

// aheadPlaces is how far a last pass looks ahead for the rows that it will write.
const aheadPlaces = 16

// orderOf gives the rows in the order in which a last pass takes their places.
func (p places) orderOf(last pass) []int32 {
	var order []int32
	for i := range last.h {
		for t := range last.radix {
			order = append(order, p.row[i+t*last.h])
		}
	}
	return append(order, make([]int32, aheadPlaces)...)
}

// schedule splits the stages of a transform of 2^degree rows into passes. The
// first pass also subtracts the mean and is of radix 8 (or none: the mean is
// then subtracted alone, as degrees 2 to 4 need), the last also writes the
// rows where they belong. Radix 8 is preferred: fewer passes.
func schedule(degree int) (first8 bool, middle []pass, last pass) {
	left, h := degree, 1
	if degree >= 5 {
		first8, left, h = true, degree-3, 8
	}
	// Twos at the end of the stages make up what threes do not divide.
	for left > 3 {
		p := pass{radix: 8, h: h}
		if left == 4 {
			p.radix = 4
		}
		middle = append(middle, p)
		for r := p.radix; r > 1; r >>= 1 {
			left--
			h *= 2
		}
	}
	return first8, middle, pass{radix: 1 << left, h: h}
}

// decode: see engine. Scale and offset are powers of two, hence exact.
func (t *transform) decode(dst, src []float32, stride int) {
	s := t.scratch.Get().(*transformScratch)
	t.load(s, &t.steps, src, stride)
	perMean := 2 / float32(t.v+1)
	for p := range s.base {
		s.base[p] = perMean * s.mean[p]
	}
	t.run(s, &t.columns, dst, stride, -2/float32(t.v+1))
	t.scratch.Put(s)
}

// predict: see engine. With f' = f - mean and H the +-1 form without its first
// row and column, whose rows sum to -1,
//
//	W f = (sum(f') - H f')/2 + k mean.
func (t *transform) predict(dst, f []float32, stride int) {
	s := t.scratch.Get().(*transformScratch)
	t.load(s, &t.columns, f, stride)
	k := float64(t.v+1) / 2
	t.passes.residue(&s.residue, s.rows[1:], &s.mean)
	for p, sum := range s.residue {
		s.base[p] = float32(float64(sum/2) + float64(k*float64(s.mean[p])))
	}
	t.run(s, &t.steps, dst, stride, -0.5)
	t.scratch.Put(s)
}

// spread is never called: an m-sequence is an S-matrix.
func (t *transform) spread([]float32, []float32, int) {
	panic("internal error: hadamard: an S-matrix spreads its variance evenly")
}

// load puts the rows of src at their places and takes their mean. Place 0 gets
// the mean, so that subtracting it leaves the zero that belongs there.
func (t *transform) load(s *transformScratch, at *places, src []float32, stride int) {
	t.passes.gather(s.rows, &s.mean, src, at.index, stride)
	for p := range s.mean {
		s.mean[p] *= t.inverse
	}
	s.rows[0] = s.mean
}

// nearRows is how many rows all passes but the last go through before they turn
// to the next ones: 32 KiB, which a first-level cache holds.
const nearRows = 512

// run transforms s.rows less s.mean and writes base + scale * row to dst.
func (t *transform) run(s *transformScratch, to *places, dst []float32, stride int, scale float32) {
	near := min(nearRows, len(s.rows))
	for from := 0; from < len(s.rows); from += near {
		t.runNear(s.rows[from:from+near], &s.mean)
	}
	for _, m := range t.middle {
		if m.h*m.radix > near {
			t.runMiddle(s.rows, m)
		}
	}
	if t.last.radix == 8 {
		t.passes.last8(s, to.last, dst, stride, scale)
	} else {
		t.passes.last4(s, to.last, dst, stride, scale)
	}
}

// runNear subtracts the mean and does the stages that stay within the rows.
func (t *transform) runNear(rows []row, mean *row) {
	if t.first8 {
		t.passes.first8(rows, mean)
	} else {
		center(rows, mean)
	}
	for _, m := range t.middle {
		if m.h*m.radix <= len(rows) {
			t.runMiddle(rows, m)
		}
	}
}

func (t *transform) runMiddle(rows []row, m pass) {
	if m.radix == 8 {
		t.passes.middle8(rows, m.h)
	} else {
		t.passes.middle4(rows, m.h)
	}
}
