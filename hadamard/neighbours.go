package hadamard

import (
	"fmt"
	"sync"
)

// Neighbours takes out of decoded pixels, to first order, the light that an open
// element gains from open neighbours. With the elements' code columns c_0..c_n-1 in
// field order, step i holds besides sum_j W_ij f_j
//
//	sum over pairs (a,b) = (c_j, c_j+1) of W_ia W_ib g_j,   g_j = (d_j f_a + d_j+1 f_b)/2
//
// where d_j is the term's size at the wavelength that element j has in the pixel.
// Decoded, a pair is A (W_a * W_b) g_j. In an m-sequence the product of two columns is
// half of (W_a + W_b - W_c) with c the column whose +-1 form is the product of
// theirs, so that the decode is (e_a + e_b - e_c) g_j/2: a ghost of -g_j/2 in column c
// and half of g_j in both elements. A star of flux f alone in its element leaves
// ghosts of -d f/4 in two columns and +d f/4 in its neighbours. In other codes the
// ghost is spread over all columns: the products are summed over the pairs and
// decoded.
//
// Safe for concurrent use.
type Neighbours struct {
	decoder *Decoder
	columns []int32
	// ghost[j] is c of pair j; nil where the code is no m-sequence.
	ghost []int32
	// open[group][i] tells which of eight pairs step i opens; nil for m-sequences.
	// The number of groups is even.
	open    [][]uint8
	kernels sums
	scratch sync.Pool // *neighbourScratch
}

// neighbourScratch holds the columns of one row of pixels, copied together so that
// each is fetched and written once, the pairs' terms and, for codes that need it,
// their sums by step and what those decode to.
type neighbourScratch struct {
	light          []row     // by code column
	half           []float32 // g_j/2, as [pair][pixel]
	sums           []wideRow
	tables         [2]subsetTable
	total, none    wideRow // total is of no use here, none stays zero
	steps, decoded []float32
}

// NewNeighbours prepares for elements whose code columns, in field order, are given:
// element j and j+1 are neighbours. An error names a column that is no column of
// the code, or is given twice.
func NewNeighbours(d *Decoder, columns []int) (*Neighbours, error) {
	v := d.code.v
	seen := make([]bool, v)
	n := &Neighbours{decoder: d, kernels: sumsOf(d.level)}
	for j, c := range columns {
		switch {
		case c < 0 || c >= v:
			return nil, fmt.Errorf("neighbours: element %d has code column %d; the code has 0 to %d", j, c, v-1)
		case seen[c]:
			return nil, fmt.Errorf("neighbours: code column %d is given twice, last for element %d", c, j)
		}
		seen[c] = true
		n.columns = append(n.columns, int32(c))
	}
	pairs := max(0, len(columns)-1)
	switch {
	case d.code.family == SlitScan:
		// No two columns are open together.
	case d.CovarianceByColumn():
		for j := range pairs {
			n.ghost = append(n.ghost, int32(d.CovarianceColumn(columns[j], columns[j+1])))
		}
	default:
		n.open = openPairs(d.code, columns)
	}
	n.scratch.New = func() any {
		s := &neighbourScratch{light: make([]row, v), half: make([]float32, pairs*lanes)}
		if n.open != nil {
			s.sums = make([]wideRow, v)
			s.steps, s.decoded = make([]float32, v*lanes), make([]float32, v*lanes)
		}
		return s
	}
	return n, nil
}

func openPairs(c *Code, columns []int) [][]uint8 {
	pairs := len(columns) - 1
	open := make([][]uint8, (pairs+2*groupRows-1)/(2*groupRows)*2)
	for group := range open {
		open[group] = make([]uint8, c.v)
	}
	for j := range pairs {
		for i := range c.v {
			open[j/groupRows][i] |= c.Bit(i, columns[j]) * c.Bit(i, columns[j+1]) << (j % groupRows)
		}
	}
	return open
}

// Pairs is the number of pairs of neighbours.
func (n *Neighbours) Pairs() int { return max(0, len(n.columns)-1) }

// Ghost is the code column in which pair j of an m-sequence leaves its ghost; -1 for
// other codes.
func (n *Neighbours) Ghost(j int) int {
	if n.ghost == nil {
		return -1
	}
	return int(n.ghost[j])
}

// Correct subtracts the term from a decoded block [code column][pixel], in place; the
// sizes are those of Decode. In pixel p, element j has
//
//	d_j = d[p] + slope[p] (j - (n-1)/2);
//
// slope may be nil. The term is computed from the decoded light, which holds the
// term itself: what is left is of second order, a third of d^2 of a star at most. The
// variance changes by less than d of itself and is left as it is.
func (n *Neighbours) Correct(block, d, slope []float32, pixels, stride int) {
	n.decoder.check("Correct", len(block), len(block), pixels, stride)
	if len(d) < pixels || (slope != nil && len(slope) < pixels) {
		panic(fmt.Sprintf("internal error: hadamard: Correct of %d pixels has %d sizes and %d slopes", pixels, len(d), len(slope)))
	}
	if n.Pairs() == 0 || n.decoder.code.family == SlitScan {
		return
	}
	s := n.scratch.Get().(*neighbourScratch)
	defer n.scratch.Put(s)
	for p := 0; p < pixels; p += lanes {
		count := min(lanes, pixels-p)
		var size, step row
		copy(size[:count], d[p:])
		if slope != nil {
			copy(step[:count], slope[p:])
		}
		s.fetch(block[p:], count, stride)
		for at := 0; at < lanes; at += quad {
			n.terms(s, &size, &step, at)
		}
		if n.ghost != nil {
			n.takeGhosts(s)
		} else {
			n.takeProducts(s)
		}
		s.write(block[p:], count, stride)
	}
}

// fetch copies up to lanes pixels of all columns; lanes past count keep what an
// earlier row left, and are not written back.
func (s *neighbourScratch) fetch(block []float32, count, stride int) {
	for c := range s.light {
		if count == lanes {
			s.light[c] = *rowAt(block, c*stride)
		} else {
			copy(s.light[c][:count], block[c*stride:])
		}
	}
}

func (s *neighbourScratch) write(block []float32, count, stride int) {
	for c := range s.light {
		if count == lanes {
			*rowAt(block, c*stride) = s.light[c]
		} else {
			copy(block[c*stride:][:count], s.light[c][:])
		}
	}
}

// takeProducts is for other codes: sums over subsets of eight pairs, as in dense.
func (n *Neighbours) takeProducts(s *neighbourScratch) {
	for p := 0; p < lanes; p += wideLanes {
		clear(s.sums)
		for group := 0; group < len(n.open); group += 2 {
			n.tabulate(s, 0, group, p)
			n.tabulate(s, 1, group+1, p)
			n.kernels.addSubsets(s.sums, &s.tables, n.open[group], n.open[group+1])
		}
		n.kernels.combine(s.steps[p:], s.sums, &s.none, lanes, 2)
	}
	n.decoder.engine.decode(s.decoded, s.steps, lanes)
	for c := range s.light {
		term := rowAt(s.decoded, c*lanes)
		for p, v := range term {
			s.light[c][p] -= v
		}
	}
}

// tabulate sets a table for the pairs of a group, of which there may be fewer
// than eight, or none.
func (n *Neighbours) tabulate(s *neighbourScratch, table, group, at int) {
	first, pairs := group*groupRows, n.Pairs()
	rows := max(0, min(groupRows, pairs-first))
	if rows > 0 {
		at += first * lanes
	}
	n.kernels.tabulate(&s.tables[table], &s.total, s.half[at:], rows, lanes)
}
