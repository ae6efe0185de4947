package plan

import (
	"crypto/sha256"
	"encoding/binary"
	"fmt"
	"math/rand/v2"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// exposures appends steps to a sequence in the order of the night.
type exposures struct {
	s       *sequence.Sequence
	rows    [][]uint8 // the code's rows, shared among steps
	columns []int     // the code column of each element
	none    []uint8   // bits of no open column
	orders  [][]int   // of the science cycles
}

func newExposures(s *sequence.Sequence, code *hadamard.Code, orders [][]int) *exposures {
	e := &exposures{s: s, orders: orders, columns: s.ElementColumns(), none: make([]uint8, s.V)}
	for row := range s.V {
		e.rows = append(e.rows, code.Row(row))
	}
	return e
}

// night appends every step of the target.
func (e *exposures) night() {
	c := e.s.Target.Calibration
	e.repeat(c.Bias.Count, sequence.Step{Kind: sequence.Bias})
	e.repeat(c.Dark.Count, sequence.Step{Kind: sequence.Dark, ExptimeSeconds: c.Dark.DwellSeconds})
	e.flats(c.Flat)
	e.arcs(c.Arc)
	e.science()
	e.refStar(c.RefStar)
}

// add appends a step that shows bits; STEP and, where there is none, ROW are
// filled in.
func (e *exposures) add(step sequence.Step, bits []uint8) {
	step.Step = len(e.s.Steps) + 1
	e.s.Steps = append(e.s.Steps, step)
	e.s.Code = append(e.s.Code, bits)
}

// repeat appends steps without light through any mirror.
func (e *exposures) repeat(count int, step sequence.Step) {
	step.Row = -1
	for range count {
		e.add(step, e.none)
	}
}

func (e *exposures) flats(f sequence.FlatFrames) {
	step := sequence.Step{Kind: sequence.Flat, Lamp: f.Lamp, ExptimeSeconds: f.DwellSeconds, Row: -1}
	all := make([]uint8, e.s.V)
	for i := range all {
		all[i] = 1
	}
	even := e.open(func(j int) bool { return j%2 == 0 })
	odd := e.open(func(j int) bool { return j%2 == 1 })
	for range f.Count {
		for _, bits := range [][]uint8{all, even, odd, e.none} {
			e.add(step, bits)
		}
	}
	for cycle := 1; cycle <= f.CodedCycles; cycle++ {
		rows := naturalRows(e.s.V)
		if e.s.Target.Code.Order != sequence.OrderNatural {
			rows = shuffledRows(e.s.OrderSeed, "flat", cycle, e.s.V)
		}
		for _, row := range rows {
			step.Row, step.Cycle = row, cycle
			e.add(step, e.rows[row])
		}
	}
}

// open gives the bits that open the elements chosen; dark columns stay 0.
func (e *exposures) open(chosen func(j int) bool) []uint8 {
	bits := make([]uint8, e.s.V)
	for j, column := range e.columns {
		if chosen(j) {
			bits[column] = 1
		}
	}
	return bits
}

// arcs takes every m-th element and the last, so that what is fitted along the
// field is never extrapolated.
func (e *exposures) arcs(a sequence.ArcFrames) {
	step := sequence.Step{Kind: sequence.Arc, Lamp: a.Lamp, ExptimeSeconds: a.DwellSeconds, Row: -1}
	last := len(e.columns) - 1
	for range a.Count {
		for j := range e.columns {
			if j%a.Every == 0 || j == last {
				e.add(step, e.open(func(k int) bool { return k == j }))
			}
		}
	}
}

// science appends the coded cycles with an all-off frame before the first
// step, after every so many steps, and after the last.
func (e *exposures) science() {
	t := e.s.Target
	off := sequence.Step{Kind: sequence.AllOff, ExptimeSeconds: t.DwellSeconds}
	total, done := t.Code.Cycles*e.s.V, 0
	if t.AllOffEvery > 0 {
		e.repeat(1, off)
	}
	for cycle := 1; cycle <= t.Code.Cycles; cycle++ {
		for _, row := range e.orders[cycle-1] {
			e.add(sequence.Step{Kind: sequence.Science, ExptimeSeconds: t.DwellSeconds, Row: row, Cycle: cycle}, e.rows[row])
			done++
			if t.AllOffEvery > 0 && (done%t.AllOffEvery == 0 || done == total) {
				e.repeat(1, off)
			}
		}
	}
}

// refStar appends frames of the reference star, all elements of its wide element open.
func (e *exposures) refStar(r *sequence.RefStarFrames) {
	if r == nil {
		return
	}
	bits := e.open(func(j int) bool { return j >= r.Elements[0] && j <= r.Elements[1] })
	for range r.Count {
		e.add(sequence.Step{Kind: sequence.RefStar, ExptimeSeconds: r.DwellSeconds, Row: -1}, bits)
	}
}

// random is a generator of its own for each cycle of each kind, so that one
// more cycle does not change the others.
func random(seed uint64, stream string, cycle int) *rand.Rand {
	key := sha256.Sum256(fmt.Appendf(nil, "%d order of %s cycle %d", seed, stream, cycle))
	return rand.New(rand.NewPCG(binary.BigEndian.Uint64(key[:8]), binary.BigEndian.Uint64(key[8:16])))
}
