package main

import (
	"fmt"

	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

const (
	// gatherAhead is how many rows before gather needs a row of src it is asked
	// for: rows stand too far apart for the processor to see it coming. Of 8 to 64
	// rows all did as well.
	gatherAhead = 16
	// lastAhead is the same for rows of dst, in rounds of the last pass. Without it
	// a decode of v = 4095 takes half as long again. Package hadamard's tables are
	// that much longer than they need be (aheadPlaces).
	lastAhead = 2
)

// transform writes the passes of hadamard's transform; passes.go there says
// what each does, in plain Go.
func (g *generator) transform() {
	g.gather()
	g.residue()
	g.first8()
	g.middle(8)
	g.middle(4)
	g.last(8)
	g.last(4)
}

// butterflies does the stages among len(r) rows, lowest first, in registers:
// r[i] and r[i+h] become their sum and difference.
func (g *generator) butterflies(r []reg.VecVirtual) {
	for h := 1; h < len(r); h *= 2 {
		for i := range r {
			if i&h != 0 {
				continue
			}
			sum := g.vector()
			g.VADDPS(r[i+h], r[i], sum)
			g.VSUBPS(r[i+h], r[i], r[i+h])
			r[i] = sum
		}
	}
}

func (g *generator) gather() {
	g.function("gather", "rows, sum, src *float32, index *int32, count, stride int",
		"copies row i of src to row index[i] of rows and sets sum to the",
		"rows' sum, in groups of four. stride counts samples.")
	rows, sumAt, src, index := g.integer("rows"), g.integer("sum"), g.integer("src"), g.integer("index")
	count, stride := g.integer("count"), g.samples("stride")
	source := g.comb(src, stride, 4)
	sum, groups := g.zero(), g.GP64()
	g.MOVQ(count, groups)
	g.SHRQ(operand.Imm(2), groups)
	ahead := g.GP64()
	g.IMUL3Q(operand.U32(gatherAhead), stride, ahead)
	g.ADDQ(src, ahead)
	wanted := g.comb(ahead, stride, 4)
	g.loopIfAny("four", groups, func() {
		for t := range 4 {
			g.PREFETCHT0(wanted.at(t, 0))
		}
		var to [4]reg.GPVirtual
		for t := range to {
			to[t] = g.place(index, t)
		}
		for part := range g.parts() {
			at := part * g.width
			var r [4]reg.VecVirtual
			for t := range r {
				r[t] = g.vector()
				g.VMOVUPS(source.at(t, at), r[t])
			}
			for t := range r {
				g.VMOVUPS(r[t], operand.Mem{Base: rows, Index: to[t], Scale: 1, Disp: at})
			}
			g.VADDPS(r[1], r[0], r[0])
			g.VADDPS(r[3], r[2], r[2])
			g.VADDPS(r[2], r[0], r[0])
			g.VADDPS(r[0], sum[part], sum[part])
		}
		g.LEAQ(operand.Mem{Base: src, Index: stride, Scale: 4}, src)
		g.LEAQ(operand.Mem{Base: ahead, Index: stride, Scale: 4}, ahead)
		g.ADDQ(operand.U32(16), index)
	})
	g.ANDQ(operand.Imm(3), count)
	g.loopIfAny("one", count, func() {
		to := g.place(index, 0)
		for part := range g.parts() {
			at, r := part*g.width, g.vector()
			g.VMOVUPS(source.at(0, at), r)
			g.VMOVUPS(r, operand.Mem{Base: rows, Index: to, Scale: 1, Disp: at})
			g.VADDPS(r, sum[part], sum[part])
		}
		g.ADDQ(stride, src)
		g.ADDQ(operand.U32(4), index)
	})
	for part, s := range sum {
		g.VMOVUPS(s, operand.Mem{Base: sumAt, Disp: part * g.width})
	}
	g.end()
}

// place is where row index[t] stands, in bytes.
func (g *generator) place(index reg.GPVirtual, t int) reg.GPVirtual {
	r := g.GP64()
	g.MOVLQZX(operand.Mem{Base: index, Disp: 4 * t}, r)
	g.SHLQ(operand.Imm(6), r)
	return r
}

func (g *generator) residue() {
	g.function("residue", "sum *float64, rows, mean *float32, count int",
		"sets sum to the sum over the rows of row less mean, the difference in",
		"float32, the sum in float64.")
	sumAt, rows, meanAt, count := g.integer("sum"), g.integer("rows"), g.integer("mean"), g.integer("count")
	// A register holds twice as many float32 as float64.
	half := g.width / 2
	sum, mean := append(g.zero(), g.zero()...), make([]reg.VecVirtual, rowBytes/half)
	for part := range mean {
		mean[part] = g.halfVector()
		g.VMOVUPS(operand.Mem{Base: meanAt, Disp: part * half}, mean[part])
	}
	g.loopIfAny("row", count, func() {
		for part := range mean {
			r, wide := g.halfVector(), g.vector()
			g.VMOVUPS(operand.Mem{Base: rows, Disp: part * half}, r)
			g.VSUBPS(mean[part], r, r)
			g.VCVTPS2PD(r, wide)
			g.VADDPD(wide, sum[part], sum[part])
		}
		g.ADDQ(operand.U32(rowBytes), rows)
	})
	for part, s := range sum {
		g.VMOVUPD(s, operand.Mem{Base: sumAt, Disp: part * g.width})
	}
	g.end()
}

func (g *generator) first8() {
	g.function("first8", "rows, mean *float32, blocks int",
		"subtracts mean from every row and does the stages 1, 2, 4 of so",
		"many blocks of eight rows.")
	rows, meanAt, blocks := g.integer("rows"), g.integer("mean"), g.integer("blocks")
	mean := g.row()
	for part, m := range mean {
		g.VMOVUPS(operand.Mem{Base: meanAt, Disp: part * g.width}, m)
	}
	g.loopIfAny("block", blocks, func() {
		for part, m := range mean {
			at := func(t int) operand.Mem {
				return operand.Mem{Base: rows, Disp: t*rowBytes + part*g.width}
			}
			r := make([]reg.VecVirtual, 8)
			for t := range r {
				r[t] = g.vector()
				g.VMOVUPS(at(t), r[t])
				g.VSUBPS(m, r[t], r[t])
			}
			g.butterflies(r)
			for t := range r {
				g.VMOVUPS(r[t], at(t))
			}
		}
		g.ADDQ(operand.U32(8*rowBytes), rows)
	})
	g.end()
}

func (g *generator) middle(radix int) {
	g.function(fmt.Sprint("middle", radix), "rows *float32, blocks, h int",
		fmt.Sprintf("does the stages h to %dh of so many blocks of %dh rows.", radix/2, radix))
	rows, blocks, step := g.integer("rows"), g.integer("blocks"), g.integer("h")
	g.SHLQ(operand.Imm(6), step)
	c := g.comb(rows, step, radix)
	g.loopIfAny("block", blocks, func() {
		// A row's parts are worked on one by one: h rows are h*parts of them.
		parts := g.GP64()
		g.MOVQ(step, parts)
		g.SHRQ(operand.Imm(uint64(shift(g.width))), parts)
		g.loop("part", parts, func() {
			r := make([]reg.VecVirtual, radix)
			for t := range r {
				r[t] = g.vector()
				g.VMOVUPS(c.at(t, 0), r[t])
			}
			g.butterflies(r)
			for t := range r {
				g.VMOVUPS(r[t], c.at(t, 0))
			}
			g.ADDQ(operand.U32(g.width), rows)
		})
		g.ADDQ(c.multiple[radix-1], rows)
	})
	g.end()
}

// shift is the power of two that n is.
func shift(n int) int {
	s := 0
	for ; n > 1; n /= 2 {
		s++
	}
	return s
}

func (g *generator) last(radix int) {
	g.function(fmt.Sprint("last", radix), "rows, drop, base, dst *float32, to *int32, h, stride int, scale float32",
		fmt.Sprintf("does the %d highest stages, of %dh rows, and writes base + scale*row.", shift(radix), radix),
		fmt.Sprintf("Row i+t*h goes to row to[%d*i+t] of dst, or to drop where to is negative,", radix),
		"which only t = 0 may be. stride counts samples.")
	rows, drop, baseAt, dst := g.integer("rows"), g.integer("drop"), g.integer("base"), g.integer("dst")
	to, count, stride := g.integer("to"), g.integer("h"), g.samples("stride")
	scale := g.vector()
	scaleAt, err := g.Param("scale").Resolve()
	if err != nil {
		panic(err)
	}
	g.VBROADCASTSS(scaleAt.Addr, scale)
	base := g.row()
	for part, b := range base {
		g.VMOVUPS(operand.Mem{Base: baseAt, Disp: part * g.width}, b)
	}
	step := g.GP64()
	g.MOVQ(count, step)
	g.SHLQ(operand.Imm(6), step)
	c := g.comb(rows, step, radix)
	g.loop("row", count, func() {
		for t := range radix {
			out := g.GP64()
			g.MOVLQSX(operand.Mem{Base: to, Disp: 4 * (t + radix*lastAhead)}, out)
			g.IMULQ(stride, out)
			g.PREFETCHT0(operand.Mem{Base: dst, Index: out, Scale: 1})
		}
		for part, b := range base {
			at := part * g.width
			r := make([]reg.VecVirtual, radix)
			for t := range r {
				r[t] = g.vector()
				g.VMOVUPS(c.at(t, at), r[t])
			}
			g.butterflies(r)
			for t := range r {
				out := g.target(to, dst, drop, stride, t)
				g.VMULPS(scale, r[t], r[t])
				g.VADDPS(r[t], b, r[t])
				g.VMOVUPS(r[t], operand.Mem{Base: out, Disp: at})
			}
		}
		g.ADDQ(operand.U32(rowBytes), rows)
		g.ADDQ(operand.U32(4*radix), to)
	})
	g.end()
}

// target is the address of row to[t] of dst; to[0] may be negative.
func (g *generator) target(to, dst, drop, stride reg.GPVirtual, t int) reg.GPVirtual {
	out := g.GP64()
	g.MOVLQSX(operand.Mem{Base: to, Disp: 4 * t}, out)
	if t > 0 {
		g.IMULQ(stride, out)
		g.ADDQ(dst, out)
		return out
	}
	row := g.GP64()
	g.MOVQ(out, row)
	g.IMULQ(stride, out)
	g.ADDQ(dst, out)
	g.TESTQ(row, row)
	g.CMOVQLT(drop, out)
	return out
}
