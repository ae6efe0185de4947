package hadamard

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// naiveGram is the definition, pixel by pixel.
func naiveGram(v int, y, s2 []float32, pixels, stride int, floor float64) (*mat.Dense, []float64) {
	sum, noise := mat.NewDense(v, v, nil), make([]float64, v)
	for p := range pixels {
		mean := 0.0
		for k := range v {
			mean += float64(s2[k*stride+p]) / float64(v)
		}
		w := 1 / max(mean, floor)
		for k := range v {
			noise[k] += float64(s2[k*stride+p]) * w
			for l := range v {
				sum.Set(k, l, sum.At(k, l)+float64(y[k*stride+p])*float64(y[l*stride+p])*w)
			}
		}
	}
	return sum, noise
}

func requireNear(t testing.TB, want, got mat.Matrix, relative float64) {
	t.Helper()
	scale := mat.Norm(want, math.Inf(1))
	n, m := want.Dims()
	for i := range n {
		for j := range m {
			require.InDelta(t, want.At(i, j), got.At(i, j), relative*scale, "(%d, %d)", i, j)
		}
	}
}

// TestGramMeetsNaive over block widths around the inner block; pixels with samples
// that are no numbers are left out and counted.
func TestGramMeetsNaive(t *testing.T) {
	const v = 7
	for _, pixels := range []int{0, 1, gramPixels - 1, gramPixels, gramPixels + 1, 3*gramPixels + 5} {
		stride := pixels + 3
		y, s2 := randomBlock(1, v, stride), randomBlock(2, v, stride)
		g := NewGram(v)
		g.Add(y, s2, pixels, stride, 250)
		sum, noise := naiveGram(v, y, s2, pixels, stride, 250)
		if pixels > 0 {
			requireNear(t, sum, g.Sum(), 1e-13)
		}
		require.InDeltaSlice(t, noise, g.Noise(), 1e-9)
		require.Equal(t, []int{pixels, 0}, []int{g.Pixels, g.Skipped})
		if pixels < 4 {
			continue
		}
		y[2*stride+1], s2[stride+2] = float32(math.NaN()), float32(math.Inf(1))
		for k := range v {
			s2[k*stride+3] = -1
		}
		g = NewGram(v)
		g.Add(y, s2, pixels, stride, 0)
		require.Equal(t, []int{pixels - 3, 3}, []int{g.Pixels, g.Skipped})
		require.False(t, math.IsNaN(mat.Norm(g.Sum(), 1)))
	}
}

// TestGramTransforms: scaled, permuted, mapped and merged are what adding such
// readings gives.
func TestGramTransforms(t *testing.T) {
	const v, pixels = 7, 300
	y, s2 := randomBlock(3, v, pixels), randomBlock(4, v, pixels)
	g := NewGram(v)
	g.Add(y, s2, pixels, pixels, 250)
	rng := rand.New(rand.NewPCG(8, 8))
	factor, m := make([]float64, v), mat.NewDense(v, v, nil)
	for k := range v {
		factor[k] = 0.5 + rng.Float64()
		for l := range v {
			m.Set(k, l, rng.NormFloat64())
		}
	}
	diagonal := mat.DenseCopyOf(mat.NewDiagDense(v, factor))
	from := []int{4, 2, 0, 1, 6, 5, 3}
	swap := mat.NewDense(v, v, nil)
	for i, a := range from {
		swap.Set(i, a, 1)
	}
	twice := []int{4, 2, 0, 0, 6, 5, 3}
	copied := mat.NewDense(v, v, nil)
	for i, a := range twice {
		copied.Set(i, a, 1)
	}
	for _, x := range []struct {
		got *Gram
		m   *mat.Dense
	}{
		{g.Scaled(factor), diagonal}, {g.Permuted(from), swap}, {g.Permuted(twice), copied}, {g.Mapped(m), m},
		{g.Mapped(m).Scaled(factor), product2(diagonal, m)}, {g.Mapped(m).Permuted(from), product2(swap, m)},
		{g.Permuted(twice).Mapped(m), product2(m, copied)},
	} {
		var want, noise mat.Dense
		want.Product(x.m, g.Sum(), x.m.T())
		noise.Product(x.m, g.NoiseCovariance(), x.m.T())
		requireNear(t, &want, x.got.Sum(), 1e-13)
		requireNear(t, &noise, x.got.NoiseCovariance(), 1e-13)
		for k, n := range x.got.Noise() {
			require.InDelta(t, noise.At(k, k), n, 1e-9)
		}
		require.Equal(t, pixels, x.got.Pixels)
	}

	a, b := NewGram(v), NewGram(v)
	a.Add(y, s2, 100, pixels, 250)
	b.Add(y[100:], s2[100:], 200, pixels, 250)
	sum := a.Mapped(m)
	a.Merge(b)
	requireNear(t, g.Sum(), a.Sum(), 1e-13)
	require.InDeltaSlice(t, g.Noise(), a.Noise(), 1e-9)
	require.Equal(t, pixels, a.Pixels)
	sum.Merge(b.Mapped(m))
	requireNear(t, g.Mapped(m).NoiseCovariance(), sum.NoiseCovariance(), 1e-13)
}

func product2(a, b *mat.Dense) *mat.Dense {
	var out mat.Dense
	out.Mul(a, b)
	return &out
}

// TestChi2MeetsResiduals: the sum over G is that over the pixels' residuals, and its
// expectation and deviation are those of 400 draws of noise of unequal rows (mean
// within 5 standard errors, deviation within 15 %, 4 of its own standard errors).
func TestChi2MeetsResiduals(t *testing.T) {
	const v, pixels, draws = 31, 60, 400
	c := mustCode(t, MSequence, v)
	checks := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20, 28})
	rng := rand.New(rand.NewPCG(5, 5))
	y, s2 := make([]float32, v*pixels), make([]float32, v*pixels)
	mean, square, expected, sd := 0.0, 0.0, 0.0, 0.0
	for range draws {
		for k := range v {
			for p := range pixels {
				s2[k*pixels+p] = float32(1 + k%3*5)
				y[k*pixels+p] = float32(rng.NormFloat64() * math.Sqrt(float64(1+k%3*5)))
			}
		}
		g := NewGram(v)
		g.Add(y, s2, pixels, pixels, 0)
		var x float64
		x, expected, sd = checks.Chi2(g)
		mean, square = mean+x/draws, square+x*x/draws

		naive := 0.0
		for _, z := range multiply(checks.Basis(), y, pixels, pixels) {
			naive += z * z
		}
		require.InEpsilon(t, naive/(181.0/31), x, 1e-5) // mean variance of 11 rows of 1, 10 of 6, 10 of 11
	}
	require.InDelta(t, expected, mean, 5*sd/math.Sqrt(draws))
	require.InEpsilon(t, sd, math.Sqrt(square-mean*mean), 0.15)
	full := NewGram(v)
	full.Add(y, s2, pixels, pixels, 0)
	x, e, s := checks.Chi2(full.Mapped(identity(v))) // by the full covariance
	wantX, wantE, wantS := checks.Chi2(full)
	require.InDeltaSlice(t, []float64{wantX, wantE, wantS}, []float64{x, e, s}, 1e-8)
}
