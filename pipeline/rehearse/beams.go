package rehearse

import (
	"mirrorloom/pipeline/sequence"
)

// beam is a set of mirrors that switch together.
type beam struct {
	// element is j, or -1 for mirrors that no step opens.
	element int
	// class is the range of rows: 0 for coded rows, 1, 2, ... for the sentinel
	// ranges in the order of ROWS.
	class int
	// first and last bound u.
	first, last int
	// stuck marks the mirrors that stand open whatever the mask.
	stuck bool
}

// beams are all sets of mirrors of a device.
type beams struct {
	list []beam
	// n is the number of elements: beam class*n + j is element j in a class.
	n int
	// columns[j] is the code column of element j.
	columns []int
	// sentinels[class-1] is the element that a sentinel range shows.
	sentinels []int
	// class[w-wFirst] is the class of a mirror row, -1 where all are closed.
	class  []int
	wFirst int
	// closed[j] lists the ranges of w closed for element j alone.
	closed [][]sequence.RowRange
	// strips[j] is the element.
	strips []sequence.Element
	// stuck gives the state of mirrors that do not move, by (u, w).
	stuck map[[2]int]bool
	// rest is the index of the beam of mirrors that no step opens, and
	// stuckOpen that of mirrors stuck open; -1 where there are none.
	rest, stuckOpen int
}

// newBeams sorts the device's mirrors; withRest asks for a beam of those that no
// step opens.
func newBeams(o *optics, withRest bool) *beams {
	seq := o.seq
	b := &beams{n: seq.N(), columns: seq.ElementColumns(), wFirst: o.wFirst, rest: -1, stuckOpen: -1}
	b.class = make([]int, o.wLast-o.wFirst+1)
	b.closed = make([][]sequence.RowRange, b.n)
	for _, r := range seq.Rows {
		b.addRange(r)
	}
	for _, column := range b.columns {
		b.strips = append(b.strips, seq.Elements[column])
	}
	for class := range len(b.sentinels) + 1 {
		for j, e := range b.strips {
			b.list = append(b.list, beam{element: j, class: class, first: e.First, last: e.Last})
		}
	}
	b.addStuck(o)
	if withRest {
		first, last := o.profile.URange()
		b.rest = len(b.list)
		b.list = append(b.list, beam{element: -1, class: -1, first: first, last: last})
	}
	return b
}

func (b *beams) addRange(r sequence.RowRange) {
	class := 0
	switch {
	case r.Use == sequence.UseClosed && r.Element >= 0:
		b.closed[r.Element] = append(b.closed[r.Element], r)
		return
	case r.Use == sequence.UseClosed:
		class = -1
	case r.Use == sequence.UseSentinel:
		b.sentinels = append(b.sentinels, r.Element)
		class = len(b.sentinels)
	}
	for w := r.First; w <= r.Last; w++ {
		b.class[w-b.wFirst] = class
	}
}

func (b *beams) addStuck(o *optics) {
	b.stuck = map[[2]int]bool{}
	first, last := o.profile.URange()
	for _, m := range o.profile.Stuck() {
		u, w := m.Column, m.Row
		if o.field.diagonal {
			u, w = m.Column+m.Row, m.Row-m.Column
		}
		b.stuck[[2]int{u, w}] = m.On
		if m.On && b.stuckOpen < 0 {
			b.stuckOpen = len(b.list)
			b.list = append(b.list, beam{element: -1, class: -1, first: first, last: last, stuck: true})
		}
	}
}

// follows reports whether mirror rows w of element j follow the masks in a
// class.
func (b *beams) follows(j, class, w int) bool {
	if b.class[w-b.wFirst] != class {
		return false
	}
	for _, r := range b.closed[j] {
		if w >= r.First && w <= r.Last {
			return false
		}
	}
	return true
}

// mirrors gives, for a beam in a mirror row, the range of u and the choice among
// them (nil for all); first > last where the beam has no mirror there. Of elements
// those that do not move are left out, unless whole asks for them.
func (b *beams) mirrors(at, w int, whole bool) (first, last int, keep func(u int) bool) {
	m := b.list[at]
	if m.element >= 0 {
		if !b.follows(m.element, m.class, w) {
			return 0, -1, nil
		}
		if len(b.stuck) > 0 && !whole {
			keep = func(u int) bool { _, stuck := b.stuck[[2]int{u, w}]; return !stuck }
		}
		return m.first, m.last, keep
	}
	if m.stuck {
		return m.first, m.last, func(u int) bool { return b.stuck[[2]int{u, w}] }
	}
	return m.first, m.last, func(u int) bool { return !b.opens(u, w) }
}

// opens reports whether any step can open a mirror.
func (b *beams) opens(u, w int) bool {
	if on, stuck := b.stuck[[2]int{u, w}]; stuck {
		return on
	}
	class := b.class[w-b.wFirst]
	first := b.strips[0].First
	if class < 0 || u < first || u > b.strips[b.n-1].Last {
		return false
	}
	j := (u - first) / (b.strips[0].Last - first + 1)
	return b.follows(j, class, w)
}

// shown is what a step really does to the mirrors.
type shown struct {
	// step is the index of the step whose mask is shown.
	step int
	// flipped shows the mask of element n-1-j in element j, inverted its
	// opposite in the mirrors of elements.
	flipped, inverted bool
}

// open reports which beams a step opens.
func (b *beams) open(seq *sequence.Sequence, s shown) []bool {
	open := make([]bool, len(b.list))
	bits := seq.Code[s.step]
	science := seq.Steps[s.step].Kind == sequence.Science
	for i, m := range b.list {
		switch {
		case m.stuck:
			open[i] = true
			continue
		case m.element < 0:
			continue
		}
		j := m.element
		if s.flipped {
			j = b.n - 1 - j
		}
		open[i] = bits[b.columns[j]] == 1
		if science && m.class > 0 {
			open[i] = j == b.sentinels[m.class-1]
		}
		open[i] = open[i] != s.inverted
	}
	return open
}
