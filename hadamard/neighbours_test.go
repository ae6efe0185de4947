package hadamard

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// spreadColumns assigns n of the code's columns to elements, in an order that has
// nothing to do with the code's.
func spreadColumns(v, n int, seed uint64) []int {
	return rand.New(rand.NewPCG(seed, 77)).Perm(v)[:n]
}

// neighbourTerm is the model, multiplied out in float64 for one pixel: what the pairs
// add to each step.
func neighbourTerm(c *Code, columns []int, f, d []float64) []float64 {
	y := make([]float64, c.V())
	for i := range y {
		for j := 1; j < len(columns); j++ {
			a, b := columns[j-1], columns[j]
			if c.Bit(i, a) == 1 && c.Bit(i, b) == 1 {
				y[i] += (d[j-1]*f[a] + d[j]*f[b]) / 2
			}
		}
	}
	return y
}

// observed is A (W f + term), the decode of what steps with the term see.
func observed(c *Code, columns []int, f, d []float64) []float64 {
	y := mat.NewVecDense(c.V(), neighbourTerm(c, columns, f, d))
	var wf, x mat.VecDense
	wf.MulVec(matrixOf(c), mat.NewVecDense(c.V(), f))
	y.AddVec(y, &wf)
	x.MulVec(inverseOf(c), y)
	return x.RawVector().Data
}

func neighbourCodes(t testing.TB) []*Code {
	return []*Code{
		mustCode(t, MSequence, 7), mustCode(t, MSequence, 31), mustCode(t, MSequence, 127),
		mustCode(t, Legendre, 11), mustCode(t, Legendre, 67), mustCode(t, TwinPrime, 35), planarCode(t, 21),
	}
}

// TestNeighboursSecondOrder: the exact forward model, corrected, is the light to
// second order in d: a tenth of d leaves a hundredth. The bound, (2d)^2 of the brightest,
// is the square of a gain of d from an element's two pairs and as much from ghosts that
// meet in its column.
func TestNeighboursSecondOrder(t *testing.T) {
	codes := neighbourCodes(t)
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		n := rapid.IntRange(2, c.V()).Draw(t, "elements")
		columns := spreadColumns(c.V(), n, rapid.Uint64().Draw(t, "seed"))
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "light"), 1))
		f := make([]float64, c.V())
		for _, column := range columns {
			f[column] = rng.Float64()
		}
		f[columns[rng.IntN(n)]] = 1
		neighbours, err := NewNeighbours(NewDecoder(c), columns)
		if err != nil {
			t.Fatal(err)
		}
		for _, size := range []float64{0.07, 0.007} {
			d := make([]float64, n)
			slope := 0.3 * size / float64(n)
			for j := range d {
				d[j] = size + slope*(float64(j)-float64(n-1)/2)
			}
			block := make([]float32, c.V())
			for j, x := range observed(c, columns, f, d) {
				block[j] = float32(x)
			}
			neighbours.Correct(block, []float32{float32(size)}, []float32{float32(slope)}, 1, 1)
			for j, x := range block {
				if miss := math.Abs(float64(x) - f[j]); miss > 4*size*size+2e-6 {
					t.Fatalf("%s %d, %d elements, d = %g: column %d is off by %g", c.Family(), c.V(), n, size, j, miss)
				}
			}
		}
	})
}

// TestNeighboursFirstOrder: the correction is linear and is A (W_a * W_b) g to the
// rounding of float32: fast path against the multiplied-out one, over whole and
// broken rows of pixels, with the samples between the rows untouched.
func TestNeighboursFirstOrder(t *testing.T) {
	for _, c := range neighbourCodes(t) {
		for _, pixels := range []int{1, lanes - 1, lanes, lanes + 1, 3*lanes + 5} {
			n := c.V() - 2
			columns := spreadColumns(c.V(), n, uint64(pixels))
			neighbours, err := NewNeighbours(NewDecoder(c), columns)
			require.NoError(t, err)
			require.Equal(t, n-1, neighbours.Pairs())
			stride := pixels + 3
			rng := rand.New(rand.NewPCG(uint64(c.V()), uint64(pixels)))
			block := make([]float32, c.V()*stride)
			for i := range block {
				block[i] = rng.Float32()
			}
			before := append([]float32(nil), block...)
			size, slope := make([]float32, pixels), make([]float32, pixels)
			for p := range size {
				size[p], slope[p] = 0.05*rng.Float32(), 0.001*rng.Float32()
			}
			neighbours.Correct(block, size, slope, pixels, stride)
			for p := range stride {
				if p >= pixels {
					for j := range c.V() {
						require.Equal(t, before[j*stride+p], block[j*stride+p])
					}
					continue
				}
				f, d := make([]float64, c.V()), make([]float64, n)
				for j := range f {
					f[j] = float64(before[j*stride+p])
				}
				for j := range d {
					d[j] = float64(size[p]) + float64(slope[p])*(float64(j)-float64(n-1)/2)
				}
				var term mat.VecDense
				term.MulVec(inverseOf(c), mat.NewVecDense(c.V(), neighbourTerm(c, columns, f, d)))
				for j := range f {
					require.InDelta(t, f[j]-term.AtVec(j), block[j*stride+p], 2e-6, "%s %d, pixel %d of %d, column %d", c.Family(), c.V(), p, pixels, j)
				}
			}
		}
	}
}

// TestNeighboursStar: the figures of the design. d = 1 % of a star leaves a ghost of
// -d/4 of it at the columns of its two pairs' products, and +d/4 in both neighbours;
// afterwards less than 0.02 % anywhere. At d = 7 %, the largest expected, d^2/3.
func TestNeighboursStar(t *testing.T) {
	c := mustCode(t, MSequence, 127)
	columns := spreadColumns(127, 111, 3)
	neighbours, err := NewNeighbours(NewDecoder(c), columns)
	require.NoError(t, err)
	for _, k := range []struct{ d, left float64 }{{0.01, 2e-4}, {0.07, 0.07 * 0.07 / 3}} {
		f, d := make([]float64, 127), make([]float64, 111)
		for j := range d {
			d[j] = k.d
		}
		const star = 40
		f[columns[star]] = 1
		x := observed(c, columns, f, d)
		ghosts := 0
		for j, v := range x {
			switch j {
			case neighbours.Ghost(star - 1), neighbours.Ghost(star):
				require.InDelta(t, -k.d/4, v, 1e-12)
				ghosts++
			case columns[star-1], columns[star+1]:
				require.InDelta(t, k.d/4, v, 1e-12)
			case columns[star]:
				require.InDelta(t, 1+k.d/2, v, 1e-12)
			default:
				require.InDelta(t, 0, v, 1e-12)
			}
		}
		require.Equal(t, 2, ghosts)
		block := make([]float32, 127)
		for j, v := range x {
			block[j] = float32(v)
		}
		neighbours.Correct(block, []float32{float32(k.d)}, nil, 1, 1)
		worst, self := 0.0, math.Abs(float64(block[columns[star]])-1)
		for j, v := range block {
			if j != columns[star] {
				worst = max(worst, math.Abs(float64(v)))
			}
		}
		t.Logf("d = %g: ghosts %.2g before, %.2g after; the star off by %.2g", k.d, k.d/4, worst, self)
		require.Less(t, worst, k.left)
		require.Less(t, self, k.d*k.d)
	}
}

func TestNeighboursRefuse(t *testing.T) {
	d := NewDecoder(mustCode(t, MSequence, 31))
	for _, columns := range [][]int{{-1}, {31}, {3, 4, 3}} {
		_, err := NewNeighbours(d, columns)
		require.Error(t, err)
	}
	// Nothing to correct: no pair, and a code that opens one column at a time.
	for _, family := range []Family{MSequence, SlitScan} {
		code := mustCode(t, family, 7)
		columns := []int{2}
		if family == SlitScan {
			columns = []int{0, 1, 2, 3, 4, 5, 6}
		}
		n, err := NewNeighbours(NewDecoder(code), columns)
		require.NoError(t, err)
		block := []float32{1, 2, 3, 4, 5, 6, 7}
		n.Correct(block, []float32{0.1}, nil, 1, 1)
		require.Equal(t, []float32{1, 2, 3, 4, 5, 6, 7}, block)
	}
}

// TestNeighboursAllocate: nothing, once the scratch is there.
func TestNeighboursAllocate(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 127), mustCode(t, Legendre, 67)} {
		n, err := NewNeighbours(NewDecoder(c), spreadColumns(c.V(), c.V()-8, 1))
		require.NoError(t, err)
		block, d := make([]float32, c.V()*64), make([]float32, 64)
		n.Correct(block, d, d, 64, 64)
		require.Zero(t, testing.AllocsPerRun(20, func() { n.Correct(block, d, d, 64, 64) }))
	}
}

// BenchmarkNeighbours is to be read beside BenchmarkDecode of the same code.
func BenchmarkNeighbours(b *testing.B) {
	for _, x := range []struct {
		f Family
		v int
	}{{MSequence, 127}, {MSequence, 511}, {Legendre, 503}} {
		b.Run(fmt.Sprintf("%s/%d", x.f, x.v), func(b *testing.B) {
			c := mustCode(b, x.f, x.v)
			n, err := NewNeighbours(NewDecoder(c), spreadColumns(x.v, x.v-x.v/8, 1))
			require.NoError(b, err)
			block, _ := benchBlock(x.v, benchPixels)
			d := make([]float32, benchPixels)
			b.SetBytes(bytesInOut(x.v, benchPixels))
			b.ReportAllocs()
			for b.Loop() {
				n.Correct(block, d, d, benchPixels, benchPixels)
			}
		})
	}
}
