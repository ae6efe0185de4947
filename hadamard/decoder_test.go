package hadamard

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// scenes are the elements' light at one pixel each: non-integer random, flat,
// and one bright element over a faint background.
func scenes(v int) map[string][]float64 {
	rng := rand.New(rand.NewPCG(7, uint64(v)))
	random, flat, bright := make([]float64, v), make([]float64, v), make([]float64, v)
	for j := range v {
		random[j] = 1000 * rng.Float64()
		flat[j] = 1234.567
		bright[j] = 0.987
	}
	bright[v/3] = 54321.0987
	return map[string][]float64{"random": random, "flat": flat, "bright": bright}
}

// readings are W f rounded to float32, one pixel.
func readings(c *Code, f []float64) []float32 {
	y := make([]float32, c.V())
	for i := range y {
		sum := 0.0
		for j, bit := range c.Row(i) {
			sum += float64(bit) * f[j]
		}
		y[i] = float32(sum)
	}
	return y
}

// naiveDecode is A y in float64, one pixel.
func naiveDecode(c *Code, y []float32) []float64 {
	open, closed := c.InverseEntries()
	x := make([]float64, c.V())
	for j := range x {
		for i, bit := range c.Row(j) { // W is symmetric
			x[j] += (closed + float64(bit)*(open-closed)) * float64(y[i])
		}
	}
	return x
}

func largest(x []float64) float64 {
	m := 0.0
	for _, a := range x {
		m = max(m, math.Abs(a))
	}
	return m
}

// TestDecodeError: the figures for the error of a float32 decode against naive
// float64 of the same readings, relative to the brightest element: 2e-6 up to
// v = 511, 6e-6 up to 4095. Readings of a smooth scene share one exponent, so
// that their float32 sums are nearly exact; readings whose sizes span decades,
// which no scene gives, are harder and are held to the same figures. Against
// the scene itself the rounding of the readings comes on top; it is logged.
func TestDecodeError(t *testing.T) {
	sizes := map[Family][]int{
		MSequence: Sizes(MSequence),
		Legendre:  {3, 7, 11, 19, 23, 31, 127, 251, 503, 1019, 4091},
		TwinPrime: Sizes(TwinPrime),
		Singer:    {7, 57, 511, 820, 3783, 4095},
		SlitScan:  {1, 2, 63, 511, 4095},

		MSequenceComplement: {511},
		LegendreComplement:  {503},
		TwinPrimeComplement: {323},
		SingerComplement:    {57, 1093, 3906},
	}
	for _, f := range Families() {
		for _, v := range sizes[f] {
			c := mustCode(t, f, v)
			figure := 2e-6
			if v > 511 {
				figure = 6e-6
			}
			line := fmt.Sprintf("%-21s v = %4d", f, v)
			for _, name := range []string{"random", "flat", "bright"} {
				scene := scenes(v)[name]
				y := readings(c, scene)
				against64 := decodeError(c, y, naiveDecode(c, y), largest(scene))
				truth := decodeError(c, y, scene, largest(scene))
				line += fmt.Sprintf("  %s %.2g (scene %.2g)", name, against64, truth)
				require.Less(t, against64, figure, line)
			}
			y := decades(v)
			want := naiveDecode(c, y)
			wild := decodeError(c, y, want, largest(want))
			t.Logf("%s  decades %.2g", line, wild)
			require.Less(t, wild, figure, line)
		}
	}
}

// decades are log-normal readings, most between 1 and 1e5.
func decades(v int) []float32 {
	rng := rand.New(rand.NewPCG(8, uint64(v)))
	y := make([]float32, v)
	for i := range y {
		y[i] = float32(math.Exp(6 + 2.5*rng.NormFloat64()))
	}
	return y
}

func decodeError(c *Code, y []float32, want []float64, brightest float64) float64 {
	got, worst := make([]float32, c.V()), 0.0
	NewDecoder(c).Decode(got, y, 1, 1)
	for j := range want {
		worst = max(worst, math.Abs(float64(got[j])-want[j]))
	}
	return worst / brightest
}

// TestFastMeetsNaive: Decode and Predict of every small code, and of sparse
// ones, against explicit matrices in float64, with several pixels and strides.
// Tolerance: a few float32 roundings of the largest value, as Decode says.
func TestFastMeetsNaive(t *testing.T) {
	for _, c := range smallCodes(t) {
		require.Same(t, c, NewDecoder(c).Code())
		for _, l := range levels() {
			requireNaive(t, newDecoder(c, l))
		}
	}
}

func requireNaive(t *testing.T, d *Decoder) {
	t.Helper()
	c := d.Code()
	for _, pixels := range []int{1, lanes - 1, lanes, 2*lanes + 3} {
		stride := pixels + pixels%3
		src := randomBlock(uint64(c.V()*100+pixels), c.V(), stride)
		before := slices.Clone(src)
		dst := make([]float32, len(src))
		d.Decode(dst, src, pixels, stride)
		requireClose(t, c, dst, multiply(inverseOf(c), src, pixels, stride), pixels, stride)
		d.Predict(dst, src, pixels, stride)
		requireClose(t, c, dst, multiply(matrixOf(c), src, pixels, stride), pixels, stride)
		require.Equal(t, before, src, "the source is not changed")
	}
}

func randomBlock(seed uint64, v, stride int) []float32 {
	rng := rand.New(rand.NewPCG(seed, 11))
	x := make([]float32, v*stride)
	for i := range x {
		x[i] = float32(rng.NormFloat64()*100 + 300)
	}
	return x
}

func requireClose(t testing.TB, c *Code, got []float32, want []float64, pixels, stride int) {
	t.Helper()
	tolerance := 2e-6 * largest(want)
	for i := range c.V() {
		for p := range pixels {
			g, w := float64(got[i*stride+p]), want[i*pixels+p]
			if !(math.Abs(g-w) <= tolerance) {
				t.Fatalf("%s %d: row %d pixel %d: %g, naive %g", c.Family(), c.V(), i, p, g, w)
			}
		}
	}
}

// TestPlaceDoesNotMatter: a pixel's result is the same bits whatever the
// stride, the pixel's place, the number of pixels, and what its neighbours
// hold; and nothing between the rows is written.
func TestPlaceDoesNotMatter(t *testing.T) {
	codes := smallCodes(t)
	codes = append(codes, mustCode(t, MSequence, 255), mustCode(t, MSequence, 511), mustCode(t, MSequence, 1023))
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		d := newDecoder(c, rapid.SampledFrom(levels()).Draw(t, "level"))
		pixels := rapid.IntRange(1, 50).Draw(t, "pixels")
		stride := pixels + rapid.IntRange(0, 20).Draw(t, "gap")
		offset := rapid.IntRange(0, 5).Draw(t, "offset")
		mine := rapid.IntRange(0, pixels-1).Draw(t, "pixel")
		src := randomBlock(rapid.Uint64().Draw(t, "seed"), c.V(), stride)
		src = append(make([]float32, offset), src...)
		if other := (mine + 1) % pixels; other != mine {
			src[offset+other] = float32(math.NaN())
		}
		alone := make([]float32, c.V())
		for i := range alone {
			alone[i] = src[offset+i*stride+mine]
		}
		for name, work := range map[string]func(dst, src []float32, pixels, stride int){
			"decode": d.Decode, "predict": d.Predict,
			"variance": func(dst, src []float32, pixels, stride int) { d.Variance(dst, src, pixels, stride, 1) },
		} {
			dst, want := make([]float32, len(src)), make([]float32, c.V())
			for i := range dst {
				dst[i] = guard
			}
			work(dst[offset:], src[offset:], pixels, stride)
			work(want, alone, 1, 1)
			for i := range want {
				got := dst[offset+i*stride+mine]
				if math.Float32bits(got) != math.Float32bits(want[i]) {
					t.Fatalf("%s of %s %d: row %d: %g in place, %g alone", name, c.Family(), c.V(), i, got, want[i])
				}
			}
			for i, x := range dst {
				within := i >= offset && (i-offset)%stride < pixels
				if !within && x != guard {
					t.Fatalf("%s of %s %d wrote between the rows at %d", name, c.Family(), c.V(), i)
				}
			}
		}
	})
}

// TestLaws: decoding inverts encoding, and is linear.
func TestLaws(t *testing.T) {
	codes := smallCodes(t)
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		d := NewDecoder(c)
		v := c.V()
		value := rapid.Float32Range(-1000, 1000)
		draw := func(name string) []float32 { return rapid.SliceOfN(value, v, v).Draw(t, name) }
		f, g, scale := draw("f"), draw("g"), rapid.Float32Range(-3, 3).Draw(t, "scale")

		y, back := make([]float32, v), make([]float32, v)
		d.Predict(y, f, 1, 1)
		d.Decode(back, y, 1, 1)
		// The readings' own rounding, up to v 1000 2^-24, decodes to at most
		// twice itself.
		for j := range f {
			if diff := math.Abs(float64(back[j] - f[j])); diff > 3e-7*1000*float64(v) {
				t.Fatalf("%s %d: element %d is %g, decoded %g", c.Family(), v, j, f[j], back[j])
			}
		}

		sum, of, og, osum := make([]float32, v), make([]float32, v), make([]float32, v), make([]float32, v)
		for i := range sum {
			sum[i] = f[i] + scale*g[i]
		}
		d.Decode(of, f, 1, 1)
		d.Decode(og, g, 1, 1)
		d.Decode(osum, sum, 1, 1)
		for j := range osum {
			want := float64(of[j]) + float64(scale)*float64(og[j])
			if math.Abs(float64(osum[j])-want) > 1e-5*4000 {
				t.Fatalf("%s %d: not linear at %d: %g, %g", c.Family(), v, j, osum[j], want)
			}
		}
	})
}

// TestConstantDecodesToItsKth: a constant offset in every reading decodes to
// 1/k of it in every column (sum of a row of A).
func TestConstantDecodesToItsKth(t *testing.T) {
	for _, c := range smallCodes(t) {
		y, x := make([]float32, c.V()), make([]float32, c.V())
		for i := range y {
			y[i] = 1e4
		}
		NewDecoder(c).Decode(x, y, 1, 1)
		for _, got := range x {
			require.InEpsilon(t, 1e4/float64(c.K()), got, 1e-6)
		}
	}
}

// TestPredictError: the forward model of the largest codes against float64, for
// Predict's figure: 1e-6 of the sum of the elements.
func TestPredictError(t *testing.T) {
	for _, c := range []*Code{
		mustCode(t, MSequence, 511), mustCode(t, MSequence, 4095), mustCode(t, Legendre, 1019), mustCode(t, TwinPrime, 899),
	} {
		for name, scene := range scenes(c.V()) {
			f, got, total := make([]float32, c.V()), make([]float32, c.V()), 0.0
			for j := range f {
				f[j] = float32(scene[j])
				scene[j] = float64(f[j])
				total += scene[j]
			}
			NewDecoder(c).Predict(got, f, 1, 1)
			worst := 0.0
			for i := range got {
				want := 0.0
				for j, bit := range c.Row(i) {
					want += float64(bit) * scene[j]
				}
				worst = max(worst, math.Abs(float64(got[i])-want))
			}
			t.Logf("%s %d %s: %.2g of the sum", c.Family(), c.V(), name, worst/total)
			require.Less(t, worst, 1e-6*total)
		}
	}
}

// TestConcurrentUse: many goroutines on one decoder get the single one's bits.
func TestConcurrentUse(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 63), mustCode(t, Legendre, 59)} {
		d := NewDecoder(c)
		const pixels = 37
		src, want := randomBlock(2, c.V(), pixels), make([]float32, c.V()*pixels)
		d.Decode(want, src, pixels, pixels)
		var wg sync.WaitGroup
		results := make([][]float32, 8)
		for g := range results {
			wg.Go(func() {
				results[g] = make([]float32, len(want))
				for range 20 {
					d.Decode(results[g], src, pixels, pixels)
				}
			})
		}
		wg.Wait()
		for _, got := range results {
			require.Equal(t, want, got)
		}
	}
}

// TestShortBlocks: sizes that do not fit are the caller's error.
func TestShortBlocks(t *testing.T) {
	d := NewDecoder(mustCode(t, MSequence, 7))
	block := make([]float32, 7*20)
	require.NotPanics(t, func() { d.Decode(make([]float32, 140), block, 20, 20) })
	require.NotPanics(t, func() { d.Decode(nil, nil, 0, 0) })
	for name, f := range map[string]func(){
		"short source":   func() { d.Decode(make([]float32, 140), block[:139], 20, 20) },
		"short result":   func() { d.Decode(make([]float32, 139), block, 20, 20) },
		"stride":         func() { d.Predict(make([]float32, 140), block, 20, 19) },
		"negative":       func() { d.Decode(make([]float32, 140), block, -1, 20) },
		"short sum":      func() { d.VarianceSum(make([]float32, 19), block, 20, 20, 0) },
		"short variance": func() { d.Variance(make([]float32, 139), block, 20, 20, 0) },
		"no S-matrix":    func() { NewDecoder(planarCode(t, 7)).VarianceSum(make([]float32, 20), block, 20, 20, 0) },
	} {
		require.Panics(t, f, name)
	}
}
