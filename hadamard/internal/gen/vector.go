package main

import (
	"fmt"

	"github.com/mmcloughlin/avo/attr"
	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/reg"
)

// rowBytes is a row of sixteen float32, or of eight float64.
const rowBytes = 64

// isa is an instruction set. The kernels are the same but for the registers'
// width: a row is one register of AVX-512, or two of AVX2.
type isa struct {
	name, suffix string
	width        int // bytes of a register
}

var (
	avx2   = isa{name: "avx2", suffix: "AVX2", width: 32}
	avx512 = isa{name: "avx512", suffix: "AVX512", width: 64}
)

// generator writes functions of one instruction set.
type generator struct {
	*build.Context
	isa
}

// parts is how many registers hold a row.
func (g *generator) parts() int { return rowBytes / g.width }

func (g *generator) vector() reg.VecVirtual {
	if g.width == rowBytes {
		return g.ZMM()
	}
	return g.YMM()
}

// halfVector holds as many float32 as a vector holds float64.
func (g *generator) halfVector() reg.VecVirtual {
	if g.width == rowBytes {
		return g.YMM()
	}
	return g.XMM()
}

// row allocates the registers of a row.
func (g *generator) row() []reg.VecVirtual {
	r := make([]reg.VecVirtual, g.parts())
	for i := range r {
		r[i] = g.vector()
	}
	return r
}

// zero allocates a row of zeros.
func (g *generator) zero() []reg.VecVirtual {
	r := g.row()
	g.clear(r)
	return r
}

func (g *generator) clear(r []reg.VecVirtual) {
	for _, v := range r {
		if g.width == rowBytes {
			g.VPXORQ(v, v, v)
		} else {
			g.VXORPS(v, v, v)
		}
	}
}

// function starts NAME+suffix with the parameters in parentheses.
func (g *generator) function(name, parameters string, doc ...string) {
	g.Function(name + g.suffix)
	g.Attributes(attr.NOSPLIT)
	g.SignatureExpr("func(" + parameters + ")")
	g.Doc(append([]string{name + g.suffix + " " + doc[0]}, doc[1:]...)...)
	g.Pragma("noescape")
}

// end returns to Go.
func (g *generator) end() {
	g.VZEROUPPER()
	g.RET()
}

// integer loads a pointer or an int parameter.
func (g *generator) integer(name string) reg.GPVirtual {
	r := g.GP64()
	g.Load(g.Param(name), r)
	return r
}

// samples loads an int parameter that counts float32 and makes it bytes.
func (g *generator) samples(name string) reg.GPVirtual {
	r := g.integer(name)
	g.SHLQ(operand.Imm(2), r)
	return r
}

// loop repeats body, which must not change count, until count, at least 1, is
// spent.
func (g *generator) loop(label string, count reg.GPVirtual, body func()) {
	g.Label(label)
	body()
	g.DECQ(count)
	g.JNZ(operand.LabelRef(label))
}

// loopIfAny is loop for a count that may be zero.
func (g *generator) loopIfAny(label string, count reg.GPVirtual, body func()) {
	done := label + "_done"
	g.TESTQ(count, count)
	g.JZ(operand.LabelRef(done))
	g.loop(label, count, body)
	g.Label(done)
}

// times is a copy of r times n, n of 1, 3, 5, 7.
func (g *generator) times(r reg.GPVirtual, n int) reg.GPVirtual {
	m := g.GP64()
	switch n {
	case 1:
		g.MOVQ(r, m)
	case 3, 5:
		g.LEAQ(operand.Mem{Base: r, Index: r, Scale: uint8(n - 1)}, m)
	case 7:
		g.LEAQ(operand.Mem{Base: r, Index: r, Scale: 2}, m)
		g.LEAQ(operand.Mem{Base: m, Index: r, Scale: 4}, m)
	default:
		panic(fmt.Sprint("no such multiple: ", n))
	}
	return m
}

// comb addresses radix rows that stand step bytes apart.
type comb struct {
	base     reg.GPVirtual
	multiple map[int]reg.GPVirtual
}

// comb keeps the odd multiples of step that radix rows need.
func (g *generator) comb(base, step reg.GPVirtual, radix int) comb {
	c := comb{base: base, multiple: map[int]reg.GPVirtual{1: step}}
	for n := 3; n < radix; n += 2 {
		c.multiple[n] = g.times(step, n)
	}
	return c
}

// at is row t, offset bytes into it.
func (c comb) at(t, offset int) operand.Mem {
	if t == 0 {
		return operand.Mem{Base: c.base, Disp: offset}
	}
	scale := 1
	for t%2 == 0 {
		t, scale = t/2, scale*2
	}
	return operand.Mem{Base: c.base, Index: c.multiple[t], Scale: uint8(scale), Disp: offset}
}
