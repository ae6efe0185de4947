package sequence

// interval is an inclusive range of integers.
type interval struct{ first, last int }

func (a interval) meet(b interval) interval {
	return interval{max(a.first, b.first), min(a.last, b.last)}
}

// device is what expansion needs to know of the mirrors.
type device struct {
	columns, rows int
	diagonal      bool
}

// u and w are the ranges of the mirror coordinates along and across the
// dispersion.
func (d device) u() interval {
	if d.diagonal {
		return interval{0, d.columns + d.rows - 2}
	}
	return interval{0, d.columns - 1}
}

func (d device) w() interval {
	if d.diagonal {
		return interval{-(d.columns - 1), d.rows - 1}
	}
	return interval{0, d.rows - 1}
}

// along gives the columns x of device row y whose u and w lie in the ranges;
// it is empty (first > last) where none do.
func (d device) along(y int, u, w interval) interval {
	x := interval{0, d.columns - 1}
	if d.diagonal {
		x = x.meet(interval{u.first - y, u.last - y})
		return x.meet(interval{y - w.last, y - w.first})
	}
	if y < w.first || y > w.last {
		return interval{0, -1}
	}
	return x.meet(u)
}

// expander turns the code bits of a step into mirror states. It is immutable
// and safe for concurrent use.
type expander struct {
	device
	elements []Element
	ranges   []RowRange
	// strips holds the u of each element, indexed by j.
	strips []interval
}

func newExpander(d device, elements []Element, ranges []RowRange) *expander {
	x := &expander{device: d, elements: elements, ranges: ranges}
	for _, e := range elements {
		if !e.Dark {
			x.strips = append(x.strips, interval{e.First, e.Last})
		}
	}
	return x
}

// expand writes the states of the device's columns*rows mirrors into dst, row
// by row, for the code bits of a step; science says whether it is a science
// step, where sentinel rows apply.
//
// A device row is a window of one table over u (in the diagonal mounting it
// moves by one from row to row), so a row costs a copy.
func (x *expander) expand(dst, bits []uint8, science bool) {
	u := x.u()
	table := make([]uint8, u.last+1)
	for _, e := range x.elements {
		if e.Dark || bits[e.Column] == 0 {
			continue
		}
		for i := e.First; i <= e.Last; i++ {
			table[i] = 1
		}
	}
	for y := range x.rows {
		from := 0
		if x.diagonal {
			from = y
		}
		copy(dst[y*x.columns:(y+1)*x.columns], table[from:])
	}
	if science {
		x.applySentinels(dst)
	}
	x.applyClosed(dst)
}

func (x *expander) applySentinels(dst []uint8) {
	for _, r := range x.ranges {
		if r.Use == UseSentinel {
			w := interval{r.First, r.Last}
			x.fill(dst, x.u(), w, 0)
			x.fill(dst, x.strips[r.Element], w, 1)
		}
	}
}

func (x *expander) applyClosed(dst []uint8) {
	for _, r := range x.ranges {
		if r.Use != UseClosed {
			continue
		}
		u := x.u()
		if r.Element >= 0 {
			u = x.strips[r.Element]
		}
		x.fill(dst, u, interval{r.First, r.Last}, 0)
	}
}

// fill sets every mirror whose u and w lie in the ranges.
func (x *expander) fill(dst []uint8, u, w interval, state uint8) {
	for y := range x.rows {
		at := x.along(y, u, w)
		for i := at.first; i <= at.last; i++ {
			dst[y*x.columns+i] = state
		}
	}
}
