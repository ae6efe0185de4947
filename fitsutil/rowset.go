package fitsutil

import "math/bits"

// rowSet records which rows of which planes were written: one bit a row. For
// 4096 planes of 4096 rows that is 2 MiB.
type rowSet struct {
	height int
	bits   []uint64 // row y of plane l is bit l*height + y
	total  int64
}

func newRowSet(planes, height int) rowSet {
	total := int64(planes) * int64(height)
	return rowSet{height: height, bits: make([]uint64, (total+63)/64), total: total}
}

// add enters h rows from y0 of nl planes from l0; fresh is false if one of
// them was in the set before.
func (s *rowSet) add(l0, nl, y0, h int) (fresh bool) {
	fresh = true
	for l := l0; l < l0+nl; l++ {
		first := int64(l)*int64(s.height) + int64(y0)
		for at, end := first, first+int64(h); at < end; {
			next := min(end, (at|63)+1)
			mask := ^uint64(0) >> (64 - (next - at)) << (at & 63)
			word := &s.bits[at>>6]
			fresh = fresh && *word&mask == 0
			*word |= mask
			at = next
		}
	}
	return fresh
}

// firstMissing finds the first row that is not in the set.
func (s *rowSet) firstMissing() (plane, row int, missing bool) {
	for i, word := range s.bits {
		at := int64(i)*64 + int64(bits.TrailingZeros64(^word))
		if ^word != 0 && at < s.total {
			return int(at / int64(s.height)), int(at % int64(s.height)), true
		}
	}
	return 0, 0, false
}
