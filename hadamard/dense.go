package hadamard

import "sync"

// dense works for any cyclic code. All that it needs of a pixel is the sum over
// the open rows, S_j = sum_i W_ij y_i, and over all, T: A y is
// b T + (a-b) S_j. The S_j are summed in groups of eight rows: the 256 sums of
// a group's subsets are tabulated, each by one addition, and every column adds
// the one that its eight bits of W name (the method of the four Russians:
// Arlazarov, Dinic, Kronrod and Faradzev 1970, Sov. Math. Dokl. 11, 1209). That
// is v/8 additions a sample in place of v/2, all in float64, so that nothing
// needs subtracting first and one rounding is left. Where less than an eighth of a
// column's entries are ones, or zeros, S_j is the sum over those alone, or T less it.
type dense struct {
	v            int
	k            float64
	open, closed float64
	sums         sums
	// window[i] has bit t set when the code's first row is 1 at i+t (mod v):
	// the subset of rows r..r+7 that column j takes is window[r+j]. It is long
	// enough that the groups of two tables need no wrapping.
	window []uint8
	// few, where not nil, are the places of the ones of the code's first row, or of
	// its zeros (then fewClosed).
	few       []int32
	fewClosed bool
	scratch   sync.Pool // *denseScratch
}

type denseScratch struct {
	tables [2]subsetTable
	wide   []wideRow // the rows, twice over
	sums   []wideRow // S_j
	total  wideRow   // T
	base   wideRow
}

func newDense(c *Code, l level) *dense {
	d := &dense{v: c.v, k: float64(c.k), sums: sumsOf(l), window: make([]uint8, 2*c.v+2*groupRows)}
	d.open, d.closed = c.InverseEntries()
	for i := range d.window {
		for t := range groupRows {
			d.window[i] |= c.first[(i+t)%c.v] << t
		}
	}
	d.fewClosed = c.k > c.v/2
	if fewer := min(c.k, c.v-c.k); fewer < c.v/groupRows {
		for i, bit := range c.first {
			if (bit == 0) == d.fewClosed {
				d.few = append(d.few, int32(i))
			}
		}
	}
	d.scratch.New = func() any {
		s := &denseScratch{sums: make([]wideRow, c.v)}
		if d.few != nil {
			s.wide = make([]wideRow, 2*c.v)
		}
		return s
	}
	return d
}

// decode: see engine.
func (d *dense) decode(dst, src []float32, stride int) {
	d.combine(dst, src, stride, d.closed, d.open-d.closed)
}

// predict: see engine. W is symmetric, so W f = S of f.
func (d *dense) predict(dst, f []float32, stride int) { d.combine(dst, f, stride, 0, 1) }

// spread: see engine.
func (d *dense) spread(dst, s2 []float32, stride int) {
	closed2 := d.closed * d.closed
	d.combine(dst, s2, stride, closed2, d.open*d.open-closed2)
}

// combine writes total*T + open*S_j.
func (d *dense) combine(dst, src []float32, stride int, total, open float64) {
	s := d.scratch.Get().(*denseScratch)
	defer d.scratch.Put(s)
	for p := 0; p < lanes; p += wideLanes {
		d.sum(s, src[p:], stride)
		for q := range s.base {
			s.base[q] = total * s.total[q]
		}
		d.sums.combine(dst[p:], s.sums, &s.base, stride, open)
	}
}

// sum fills s.sums and s.total for the first eight pixels of src.
func (d *dense) sum(s *denseScratch, src []float32, stride int) {
	s.total = wideRow{}
	if d.few != nil {
		d.sumFew(s, src, stride)
		return
	}
	clear(s.sums)
	for first := 0; first < d.v; first += 2 * groupRows {
		d.tabulate(s, 0, first, src, stride)
		d.tabulate(s, 1, first+groupRows, src, stride)
		d.sums.addSubsets(s.sums, &s.tables, d.window[first:], d.window[first+groupRows:])
	}
}

// tabulate sets a table for the rows from first on, of which there may be fewer
// than eight, or none.
func (d *dense) tabulate(s *denseScratch, table, first int, src []float32, stride int) {
	rows := max(0, min(groupRows, d.v-first))
	if rows > 0 {
		src = src[first*stride:]
	}
	d.sums.tabulate(&s.tables[table], &s.total, src, rows, stride)
}

// sumFew is sum by the rows that few names: those of column j are few less j, mod v.
func (d *dense) sumFew(s *denseScratch, src []float32, stride int) {
	d.sums.widen(s.wide, &s.total, src, stride)
	d.sums.addPlaces(s.sums, s.wide, d.few)
	if !d.fewClosed {
		return
	}
	for j := range s.sums {
		sum := &s.sums[j]
		for p := range sum {
			sum[p] = s.total[p] - sum[p]
		}
	}
}
