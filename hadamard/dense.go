package hadamard

import "sync"

const (
	// groupRows is how many rows share one table of subset sums: 256 entries of
	// 16 pixels are 32 KiB, the most that a first-level cache holds.
	groupRows = 8
	subsets   = 1 << groupRows
)

// wideRow is a row of a block in float64.
type wideRow [lanes]float64

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
	// window[i] has bit t set when the code's first row is 1 at i+t (mod v):
	// the subset of rows r..r+7 that column j takes is window[r+j].
	window []uint8
	// few, where not nil, are the places of the ones of the code's first row, or of
	// its zeros (then fewClosed).
	few       []int
	fewClosed bool
	scratch   sync.Pool // *denseScratch
}

type denseScratch struct {
	table [subsets]wideRow
	sums  []wideRow // S_j
	total wideRow   // T
}

func newDense(c *Code) *dense {
	d := &dense{v: c.v, k: float64(c.k), window: make([]uint8, c.v)}
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
				d.few = append(d.few, i)
			}
		}
	}
	d.scratch.New = func() any { return &denseScratch{sums: make([]wideRow, c.v)} }
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
	d.sum(s, src, stride)
	var base wideRow
	for p := range base {
		base[p] = total * s.total[p]
	}
	for j := range s.sums {
		o, r := rowAt(dst, j*stride), &s.sums[j]
		for p := range o {
			o[p] = float32(base[p] + float64(open*r[p]))
		}
	}
	d.scratch.Put(s)
}

// sum fills s.sums and s.total.
func (d *dense) sum(s *denseScratch, src []float32, stride int) {
	clear(s.sums)
	s.total = wideRow{}
	if d.few != nil {
		d.sumFew(s, src, stride)
		return
	}
	for first := 0; first < d.v; first += groupRows {
		rows := min(groupRows, d.v-first)
		tabulate(s, src[first*stride:], rows, stride)
		mask := uint8(1<<rows - 1)
		// Columns in the two runs over which window does not wrap.
		addSubsets(s.sums[:d.v-first], d.window[first:], &s.table, mask)
		addSubsets(s.sums[d.v-first:], d.window[:first], &s.table, mask)
	}
}

// sumFew is sum by the rows that few names: those of column j are few less j, mod v.
func (d *dense) sumFew(s *denseScratch, src []float32, stride int) {
	for i := range d.v {
		for p, x := range rowAt(src, i*stride) {
			s.total[p] += float64(x)
		}
	}
	for j := range s.sums {
		sum := &s.sums[j]
		for _, place := range d.few {
			i := place - j
			if i < 0 {
				i += d.v
			}
			for p, x := range rowAt(src, i*stride) {
				sum[p] += float64(x)
			}
		}
		if d.fewClosed {
			for p := range sum {
				sum[p] = s.total[p] - sum[p]
			}
		}
	}
}

// tabulate sets the sums of all subsets of up to eight rows and adds the whole
// group to the total.
func tabulate(s *denseScratch, src []float32, rows, stride int) {
	s.table[0] = wideRow{}
	for t := range rows {
		r := rowAt(src, t*stride)
		half := s.table[1<<t : 2<<t]
		for i := range half {
			without, with := &s.table[i], &half[i]
			for p := range with {
				with[p] = without[p] + float64(r[p])
			}
		}
	}
	all := &s.table[1<<rows-1]
	for p := range all {
		s.total[p] += all[p]
	}
}

// addSubsets adds to each column the subset sum that its window names.
func addSubsets(sums []wideRow, window []uint8, table *[subsets]wideRow, mask uint8) {
	window = window[:len(sums)]
	for j := range sums {
		r, add := &sums[j], &table[window[j]&mask]
		for p := range r {
			r[p] += add[p]
		}
	}
}
