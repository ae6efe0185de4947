package hadamard

import (
	"fmt"
	"sync"
)

// lanes is how many pixels are worked on together. Sixteen float32 are one
// cache line and one AVX-512 register, or two of AVX2, and a block of 511 rows
// is 32 KiB: it stays in the first-level cache.
const lanes = 16

// row is one row of a block of pixels.
type row [lanes]float32

// Decoder inverts a code on blocks of pixels. It is safe for concurrent use:
// scratch is pooled, so that nothing is allocated once as many goroutines as
// work at a time have each made a call.
type Decoder struct {
	code   *Code
	level  level
	engine engine
	tails  sync.Pool // *tail
}

// engine does the work of one family on exactly lanes pixels: src and dst
// start at the first of them. The methods may not be called with less.
type engine interface {
	decode(dst, src []float32, stride int)
	predict(dst, f []float32, stride int)
	// spread is b^2 sum(s2) + (a^2-b^2)(W's2)_j, not floored. It is called for
	// codes that are no S-matrices only.
	spread(dst, s2 []float32, stride int)
}

// tail holds the last pixels of a block that is no multiple of lanes, so that
// they run through the same code as the others.
type tail struct{ dst, src []float32 }

// NewDecoder makes the decoder of a code. An m-sequence decodes by a fast
// Walsh-Hadamard transform, other cyclic codes by sums over subsets of eight
// rows, the slit scan by a copy.
//
// The kernels use what instructions the processor has (CPULevel); results are
// the same bits with any.
func NewDecoder(c *Code) *Decoder { return newDecoder(c, bestLevel()) }

// newDecoder makes a decoder with the kernels of a level, one of levels().
func newDecoder(c *Code, l level) *Decoder {
	d := &Decoder{code: c, level: l}
	switch c.family {
	case SlitScan:
		d.engine = copier{v: c.v}
	case MSequence:
		d.engine = newTransform(c, l)
	default:
		d.engine = newDense(c, l)
	}
	d.tails.New = func() any {
		return &tail{dst: make([]float32, c.v*lanes), src: make([]float32, c.v*lanes)}
	}
	return d
}

// Code is the code that d decodes.
func (d *Decoder) Code() *Code { return d.code }

// Decode solves y = Wf for every pixel: dst = A src.
//
// src holds y as [code row][pixel], row i at src[i*stride : i*stride+pixels];
// dst receives f as [code column][pixel] with the same stride. The two may not
// overlap; src is not changed, nor what lies between the rows of dst. It is fastest
// when rows are an odd number of cache lines (16 samples) apart: a power of two
// puts them all into the same few places of a cache, and costs a factor of 3.
//
// The float32 transform of an m-sequence works on y less its pixel's mean over
// the rows, and mean/k is added back, which is exact algebra since the rows of
// A sum to 1/k: the error is below 2e-6 of the brightest element up to v = 511
// and 6e-6 up to 4095. Other cyclic codes are summed in float64 and rounded
// once, at most 1e-7 of the brightest.
func (d *Decoder) Decode(dst, src []float32, pixels, stride int) {
	d.each("Decode", d.engine.decode, dst, src, pixels, stride)
}

// Predict is the forward model: dst[i] = sum_j W[i][j] f[j] for every pixel,
// f as [code column][pixel], dst as [code row][pixel]; the rest as in Decode.
// The error is below 1e-6 of the sum of |f| to v = 4095.
func (d *Decoder) Predict(dst, f []float32, pixels, stride int) {
	d.each("Predict", d.engine.predict, dst, f, pixels, stride)
}

// each runs work over the pixels, lanes at a time.
func (d *Decoder) each(name string, work func(dst, src []float32, stride int), dst, src []float32, pixels, stride int) {
	d.check(name, len(dst), len(src), pixels, stride)
	p := 0
	for ; p+lanes <= pixels; p += lanes {
		work(dst[p:], src[p:], stride)
	}
	if p == pixels {
		return
	}
	n := pixels - p
	t := d.tails.Get().(*tail)
	defer d.tails.Put(t)
	for i := range d.code.v {
		// Lanes past n hold what an earlier tail left: they are not read back.
		copy(t.src[i*lanes:i*lanes+n], src[p+i*stride:])
	}
	work(t.dst, t.src, lanes)
	for j := range d.code.v {
		copy(dst[p+j*stride:p+j*stride+n], t.dst[j*lanes:])
	}
}

// check guards the callers' invariants on block sizes.
func (d *Decoder) check(name string, dst, src, pixels, stride int) {
	need := (d.code.v-1)*stride + pixels
	if pixels < 0 || stride < pixels || dst < need || src < need {
		panic(fmt.Sprintf("internal error: hadamard: %s of %d rows of %d pixels at stride %d needs %d samples, has %d in and %d out",
			name, d.code.v, pixels, stride, need, src, dst))
	}
}

// rowAt is the row of lanes pixels that starts block[at:].
func rowAt(block []float32, at int) *row { return (*row)(block[at:]) }
