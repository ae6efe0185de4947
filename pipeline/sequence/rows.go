package sequence

import (
	"cmp"
	"slices"
)

// RowRanges lists what the target does with the mirror rows wFirst..wLast:
// first ranges that tile them (sentinel, closed for all, the rest coded), then
// the rows closed for one element, all ascending. It trusts the target: the
// sequence that gets them checks them.
func (t *Target) RowRanges(wFirst, wLast int) []RowRange {
	var tiles, partial []RowRange
	for _, r := range t.SentinelRows {
		tiles = append(tiles, RowRange{r.First, r.Last, UseSentinel, r.Element})
	}
	for _, r := range t.Closed {
		if r.Element == nil {
			tiles = append(tiles, RowRange{r.First, r.Last, UseClosed, -1})
		} else {
			partial = append(partial, RowRange{r.First, r.Last, UseClosed, *r.Element})
		}
	}
	ascending := func(a, b RowRange) int {
		return cmp.Or(cmp.Compare(a.First, b.First), cmp.Compare(a.Last, b.Last), cmp.Compare(a.Element, b.Element))
	}
	slices.SortFunc(tiles, ascending)
	slices.SortFunc(partial, ascending)
	var all []RowRange
	next := wFirst
	for _, r := range tiles {
		if r.First > next {
			all = append(all, RowRange{next, r.First - 1, UseCoded, -1})
		}
		all = append(all, r)
		next = max(next, r.Last+1)
	}
	if next <= wLast {
		all = append(all, RowRange{next, wLast, UseCoded, -1})
	}
	return append(all, partial...)
}

// checkRows demands that the ranges tile the device and do not contradict one
// another.
func (s *Sequence) checkRows() error {
	n := s.N()
	for i, r := range s.Rows {
		if err := checkRowRange(i, r, n); err != nil {
			return err
		}
	}
	if err := s.checkTiles(); err != nil {
		return err
	}
	return s.checkPartial()
}

func checkRowRange(i int, r RowRange, n int) error {
	switch {
	case r.First > r.Last:
		return fault("ROWS row %d reaches from %d back to %d", i+1, r.First, r.Last)
	case r.Use != UseCoded && r.Use != UseSentinel && r.Use != UseClosed:
		return fault("ROWS row %d has the unknown USE %q", i+1, r.Use)
	case r.Element < -1 || r.Element >= n:
		return fault("ROWS row %d names element %d where the field has elements 0 to %d", i+1, r.Element, n-1)
	case r.Use == UseSentinel && r.Element < 0:
		return fault("ROWS row %d is a sentinel of no element", i+1)
	case r.Use == UseCoded && r.Element != -1:
		return fault("ROWS row %d is coded and names element %d, not -1", i+1, r.Element)
	}
	return nil
}

// partial tells a range that closes one element from those that tile w.
func (r RowRange) partial() bool { return r.Use == UseClosed && r.Element >= 0 }

// checkTiles demands that the ranges of all elements tile w in order.
func (s *Sequence) checkTiles() error {
	w := s.device().w()
	next := w.first
	for i, r := range s.Rows {
		if r.partial() {
			continue
		}
		if r.First < w.first || r.Last > w.last {
			return fault("ROWS row %d reaches from %d to %d, off the device's w of %d to %d", i+1, r.First, r.Last, w.first, w.last)
		}
		if r.First != next {
			return fault("ROWS row %d begins at %d where %d is next: the ranges must neither overlap nor leave a gap", i+1, r.First, next)
		}
		next = r.Last + 1
	}
	if next != w.last+1 {
		return fault("ROWS ends at %d where the device's w ends at %d", next-1, w.last)
	}
	return nil
}

// checkPartial refuses rows that are closed twice for one element, or that are
// both its sentinel and closed for it.
func (s *Sequence) checkPartial() error {
	w := s.device().w()
	for i, r := range s.Rows {
		if !r.partial() {
			continue
		}
		if r.First < w.first || r.Last > w.last {
			return fault("ROWS row %d reaches from %d to %d, off the device's w of %d to %d", i+1, r.First, r.Last, w.first, w.last)
		}
		for k, other := range s.Rows {
			if k == i || other.Element != r.Element || other.Last < r.First || other.First > r.Last {
				continue
			}
			return fault("ROWS rows %d and %d both speak of element %d in the mirror rows %d to %d", min(i, k)+1, max(i, k)+1, r.Element, max(r.First, other.First), min(r.Last, other.Last))
		}
	}
	return nil
}
