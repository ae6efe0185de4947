package hadamard

import (
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
)

// TestLevels: pure Go is always there, and what CPULevel names is the last one.
func TestLevels(t *testing.T) {
	all := levels()
	t.Log("tested:", all)
	require.Equal(t, pureGo, all[0])
	require.True(t, slices.IsSorted(all))
	require.Equal(t, runtime.GOARCH+" "+all[len(all)-1].String(), CPULevel())
}

// guardedBlock is a block at a chosen offset from a cache line (or near it: Go
// aligns large slices), with guards before and behind.
type guardedBlock struct {
	all, block []float32
	guards     int
}

// guard is a number that no test data holds.
const guard = -987.625

func newGuarded(samples, offset int) guardedBlock {
	g := guardedBlock{guards: 4*lanes + offset}
	g.all = make([]float32, samples+2*g.guards)
	for i := range g.all {
		g.all[i] = guard
	}
	g.block = g.all[g.guards : g.guards+samples]
	return g
}

func (g guardedBlock) requireWhole(t *testing.T, pixels, stride int, text string) {
	t.Helper()
	for i, x := range g.all {
		at := i - g.guards
		inside := at >= 0 && at < len(g.block) && at%stride < pixels
		if !inside && x != guard {
			t.Fatalf("%s: wrote outside of the rows, at %d", text, at)
		}
	}
}

// kernelCodes are all m-sequences, and of every other way to decode some, with
// v over groups of eight and tables of two of them.
func kernelCodes(t *testing.T) []*Code {
	var codes []*Code
	for _, v := range Sizes(MSequence) {
		codes = append(codes, mustCode(t, MSequence, v))
	}
	for _, v := range []int{3, 7, 11, 19, 23, 31, 103, 503} {
		codes = append(codes, mustCode(t, Legendre, v))
	}
	return append(codes, mustCode(t, TwinPrime, 35), mustCode(t, TwinPrime, 899), mustCode(t, Singer, 820),
		mustCode(t, SingerComplement, 1093), planarCode(t, 21), planarCode(t, 57))
}

// TestLevelsAgree: Decode, Predict and Variance of every level give the bits of
// pure Go, whatever the pixels, stride and misalignment; nothing else is written
// and the source stays. Pure Go itself is held against naive forms elsewhere.
func TestLevelsAgree(t *testing.T) {
	for _, c := range kernelCodes(t) {
		reference := newDecoder(c, pureGo)
		for _, l := range levels()[1:] {
			d := newDecoder(c, l)
			for offset := range lanes {
				if offset%5 != 0 && c.V() > 127 {
					continue // the same kernels
				}
				for _, pixels := range []int{1, lanes - 1, lanes, lanes + 1, 3*lanes + 5} {
					if pixels > lanes+1 && c.V() > 2047 {
						continue
					}
					requireSameBits(t, reference, d, pixels, pixels+offset*3, offset)
				}
			}
		}
	}
}

func requireSameBits(t *testing.T, want, got *Decoder, pixels, stride, offset int) {
	t.Helper()
	v := got.Code().V()
	samples := (v-1)*stride + pixels
	src := newGuarded(samples, offset)
	fillRows(src.block, pixels, stride)
	before := slices.Clone(src.all)
	for name, work := range map[string]func(d *Decoder, dst, src []float32){
		"Decode":  func(d *Decoder, dst, src []float32) { d.Decode(dst, src, pixels, stride) },
		"Predict": func(d *Decoder, dst, src []float32) { d.Predict(dst, src, pixels, stride) },
		"Variance": func(d *Decoder, dst, src []float32) {
			d.Variance(dst, src, pixels, stride, float32(math.Inf(-1)))
		},
	} {
		text := fmt.Sprintf("%s of %s %d, %s, %d pixels at stride %d from %d", name, got.Code().Family(), v, got.level, pixels, stride, offset)
		w, g := newGuarded(samples, 0), newGuarded(samples, (offset*7+3)%lanes)
		work(want, w.block, src.block)
		work(got, g.block, src.block)
		g.requireWhole(t, pixels, stride, text)
		for i := range w.block {
			if bitsOf(w.block[i]) != bitsOf(g.block[i]) {
				t.Fatalf("%s: row %d pixel %d: %g, pure Go %g", text, i/stride, i%stride, g.block[i], w.block[i])
			}
		}
		require.True(t, slices.EqualFunc(before, src.all, func(a, b float32) bool { return bitsOf(a) == bitsOf(b) }), text+": the source is not changed")
	}
}

// bitsOf x are its bits; which not-a-number it is does not count.
func bitsOf(x float32) uint32 {
	if x != x {
		return math.Float32bits(float32(math.NaN()))
	}
	return math.Float32bits(x)
}

// fillRows fills the rows with numbers of all sizes, some pixels with zeros of
// either sign, numbers too small for all their digits, and what is no number.
func fillRows(block []float32, pixels, stride int) {
	rng := rand.New(rand.NewPCG(uint64(len(block)), uint64(stride)))
	odd := []float32{0, float32(math.Copysign(0, -1)), 1e-42, -3e-44, float32(math.Inf(1)), float32(math.NaN()), math.MaxFloat32}
	for at := range block {
		p := at % stride
		if p >= pixels {
			continue
		}
		block[at] = float32(rng.NormFloat64() * math.Exp(3*rng.NormFloat64()))
		if p%4 == 3 && rng.IntN(8) == 0 {
			block[at] = odd[p/4%len(odd)]
		}
		if p%8 == 5 {
			block[at] = odd[rng.IntN(4)]
		}
	}
}

// TestNeighboursAgree: the neighbour term of codes that need sums over pairs.
func TestNeighboursAgree(t *testing.T) {
	c := mustCode(t, Legendre, 59)
	for _, elements := range []int{2, 9, 10, 17, 18, 40} {
		columns := rand.New(rand.NewPCG(1, uint64(elements))).Perm(59)[:elements]
		const pixels = 2*lanes + 3
		size := randomBlock(1, 1, pixels)
		results := map[level][]float32{}
		for _, l := range levels() {
			n, err := NewNeighbours(newDecoder(c, l), columns)
			require.NoError(t, err)
			results[l] = randomBlock(3, 59, pixels)
			n.Correct(results[l], size, nil, pixels, pixels)
		}
		for _, l := range levels()[1:] {
			require.Equal(t, results[pureGo], results[l], "%s, %d elements", l, elements)
		}
	}
}
