package main

import (
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// subsets writes the kernels of hadamard's sums over subsets; sums.go there
// says what each does, in plain Go. Their rows are eight float64.
func (g *generator) subsets() {
	g.tabulate()
	g.addSubsets()
	g.combine()
	g.widen()
	g.addPlaces()
}

// wide is a row of eight float64 at offset bytes from base.
func (g *generator) wide(base reg.GPVirtual, offset int) []operand.Mem {
	m := make([]operand.Mem, g.parts())
	for part := range m {
		m[part] = operand.Mem{Base: base, Disp: offset + part*g.width}
	}
	return m
}

func (g *generator) load(from []operand.Mem, to []reg.VecVirtual) {
	for part := range from {
		g.VMOVUPD(from[part], to[part])
	}
}

func (g *generator) store(from []reg.VecVirtual, to []operand.Mem) {
	for part := range from {
		g.VMOVUPD(from[part], to[part])
	}
}

// add is sum = sum + what stands at from.
func (g *generator) add(from []operand.Mem, sum []reg.VecVirtual) {
	for part := range from {
		g.VADDPD(from[part], sum[part], sum[part])
	}
}

// convert makes eight float32 at from float64.
func (g *generator) convert(from reg.GPVirtual, to []reg.VecVirtual) {
	for part := range to {
		g.VCVTPS2PD(operand.Mem{Base: from, Disp: part * g.width / 2}, to[part])
	}
}

func (g *generator) tabulate() {
	g.function("tabulate", "table, total *float64, src *float32, rows, stride int",
		"sets the sums of all subsets of eight rows of src, of which those",
		"from rows on are zeros, and adds all eight to total. stride counts samples.")
	table, totalAt, src := g.integer("table"), g.integer("total"), g.integer("src")
	rows, stride := g.integer("rows"), g.samples("stride")
	g.store(g.zero(), g.wide(table, 0))
	with, size, r := g.GP64(), g.GP64(), g.zero()
	g.LEAQ(operand.Mem{Base: table, Disp: rowBytes}, with)
	g.MOVQ(operand.U32(1), size)
	g.Label("next")
	g.TESTQ(rows, rows)
	g.JZ(operand.LabelRef("none"))
	g.convert(src, r)
	g.ADDQ(stride, src)
	g.DECQ(rows)
	g.JMP(operand.LabelRef("ready"))
	g.Label("none")
	g.clear(r)
	g.Label("ready")
	without, count := g.GP64(), g.GP64()
	g.MOVQ(table, without)
	g.MOVQ(size, count)
	sum := g.row()
	g.loop("subset", count, func() {
		g.load(g.wide(without, 0), sum)
		for part := range sum {
			g.VADDPD(r[part], sum[part], sum[part])
		}
		g.store(sum, g.wide(with, 0))
		g.ADDQ(operand.U32(rowBytes), without)
		g.ADDQ(operand.U32(rowBytes), with)
	})
	g.SHLQ(operand.Imm(1), size)
	g.CMPQ(size, operand.U32(256))
	g.JNE(operand.LabelRef("next"))
	// The last one holds all rows.
	total := g.row()
	g.load(g.wide(totalAt, 0), total)
	for part := range sum {
		g.VADDPD(sum[part], total[part], total[part])
	}
	g.store(total, g.wide(totalAt, 0))
	g.end()
}

func (g *generator) addSubsets() {
	g.function("addSubsets", "sums, table *float64, first, second *uint8, count int",
		"adds to sums[j] entry first[j] of the table, then entry second[j]",
		"of the table behind it.")
	sums, table := g.integer("sums"), g.integer("table")
	first, second, count := g.integer("first"), g.integer("second"), g.integer("count")
	j := g.GP64()
	g.XORQ(j, j)
	g.loopIfAny("column", count, func() {
		sum := g.row()
		g.load(g.wide(sums, 0), sum)
		for half, window := range []reg.GPVirtual{first, second} {
			subset := g.GP64()
			g.MOVBQZX(operand.Mem{Base: window, Index: j, Scale: 1}, subset)
			g.SHLQ(operand.Imm(6), subset)
			for part := range sum {
				entry := operand.Mem{Base: table, Index: subset, Scale: 1, Disp: half*256*rowBytes + part*g.width}
				g.VADDPD(entry, sum[part], sum[part])
			}
		}
		g.store(sum, g.wide(sums, 0))
		g.INCQ(j)
		g.ADDQ(operand.U32(rowBytes), sums)
	})
	g.end()
}

func (g *generator) combine() {
	g.function("combine", "dst *float32, sums, base *float64, count, stride int, factor float64",
		"writes base + factor*sums[j] to row j of dst. stride counts samples.")
	dst, sums, baseAt := g.integer("dst"), g.integer("sums"), g.integer("base")
	count, stride := g.integer("count"), g.samples("stride")
	base, factor := g.row(), g.vector()
	g.load(g.wide(baseAt, 0), base)
	factorAt, err := g.Param("factor").Resolve()
	if err != nil {
		panic(err)
	}
	g.VBROADCASTSD(factorAt.Addr, factor)
	g.loopIfAny("column", count, func() {
		for part, m := range g.wide(sums, 0) {
			r := g.vector()
			g.VMULPD(m, factor, r)
			g.VADDPD(r, base[part], r)
			to := operand.Mem{Base: dst, Disp: part * g.width / 2}
			narrow := g.halfVector()
			if g.width == rowBytes {
				g.VCVTPD2PS(r, narrow)
			} else {
				g.VCVTPD2PSY(r, narrow)
			}
			g.VMOVUPS(narrow, to)
		}
		g.ADDQ(operand.U32(rowBytes), sums)
		g.ADDQ(stride, dst)
	})
	g.end()
}

func (g *generator) widen() {
	g.function("widen", "wide, total *float64, src *float32, count, stride int",
		"makes row i of src, one of count, float64 at wide[i] and again at",
		"wide[i+count], and adds it to total. stride counts samples.")
	wide, totalAt, src := g.integer("wide"), g.integer("total"), g.integer("src")
	count, stride := g.integer("count"), g.samples("stride")
	again := g.GP64()
	g.MOVQ(count, again)
	g.SHLQ(operand.Imm(6), again)
	g.ADDQ(wide, again)
	total := g.row()
	g.load(g.wide(totalAt, 0), total)
	g.loopIfAny("row", count, func() {
		r := g.row()
		g.convert(src, r)
		g.store(r, g.wide(wide, 0))
		g.store(r, g.wide(again, 0))
		for part := range r {
			g.VADDPD(r[part], total[part], total[part])
		}
		g.ADDQ(stride, src)
		g.ADDQ(operand.U32(rowBytes), wide)
		g.ADDQ(operand.U32(rowBytes), again)
	})
	g.store(total, g.wide(totalAt, 0))
	g.end()
}

// together is how many columns addPlaces sums at a time: as many additions as
// are under way at once, so that none waits for the one before.
const together = 4

func (g *generator) addPlaces() {
	g.function("addPlaces", "sums, wide *float64, places *int32, count, columns int",
		"sets sums[j] to the sum over the count places i of wide[i+columns-j],",
		"from the first place on.")
	sums, wide, places := g.integer("sums"), g.integer("wide"), g.integer("places")
	count, columns := g.integer("count"), g.integer("columns")
	// from is where place 0 of the column stands.
	from := g.GP64()
	g.MOVQ(columns, from)
	g.SHLQ(operand.Imm(6), from)
	g.ADDQ(wide, from)
	quads := g.GP64()
	g.MOVQ(columns, quads)
	g.SHRQ(operand.Imm(2), quads)
	g.loopIfAny("four", quads, func() { g.addUp("places4", sums, from, places, count, together) })
	g.ANDQ(operand.Imm(together-1), columns)
	g.loopIfAny("one", columns, func() { g.addUp("places1", sums, from, places, count, 1) })
	g.end()
}

// addUp sums the places of so many columns and goes on to the next ones.
func (g *generator) addUp(label string, sums, from, places, count reg.GPVirtual, columns int) {
	sum := make([][]reg.VecVirtual, columns)
	for c := range sum {
		sum[c] = g.zero()
	}
	place, left := g.GP64(), g.GP64()
	g.MOVQ(places, place)
	g.MOVQ(count, left)
	g.loopIfAny(label, left, func() {
		at := g.GP64()
		g.MOVLQZX(operand.Mem{Base: place}, at)
		g.SHLQ(operand.Imm(6), at)
		g.ADDQ(from, at)
		for c := range sum {
			g.add(g.wide(at, -c*rowBytes), sum[c])
		}
		g.ADDQ(operand.U32(4), place)
	})
	for c := range sum {
		g.store(sum[c], g.wide(sums, c*rowBytes))
	}
	g.ADDQ(operand.U32(columns*rowBytes), sums)
	g.SUBQ(operand.U32(columns*rowBytes), from)
}
