package hadamard

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// TestVarianceMeetsNaive: against the squares of A multiplied out.
func TestVarianceMeetsNaive(t *testing.T) {
	for _, c := range smallCodes(t) {
		d := NewDecoder(c)
		require.Equal(t, c.K() == 2*c.L(), d.VarianceUniform())
		squares := inverseOf(c)
		squares.Apply(func(_, _ int, x float64) float64 { return x * x }, squares)
		for _, pixels := range []int{1, lanes, lanes + 7} {
			stride := pixels + 2
			s2, dst := randomBlock(uint64(c.V()), c.V(), stride), make([]float32, c.V()*stride)
			d.Variance(dst, s2, pixels, stride, float32(math.Inf(-1)))
			want := multiply(squares, s2, pixels, stride)
			for j := range c.V() {
				for p := range pixels {
					require.InEpsilon(t, want[j*pixels+p], dst[j*stride+p], 1e-6)
				}
			}
			if d.VarianceUniform() {
				sum := make([]float32, pixels)
				d.VarianceSum(sum, s2, pixels, stride, float32(math.Inf(-1)))
				require.Equal(t, dst[:pixels], sum)
			}
		}
	}
}

// TestVarianceFloor: single variances may be negative, only the result is
// raised.
func TestVarianceFloor(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 7), planarCode(t, 7), mustCode(t, SlitScan, 7)} {
		d := NewDecoder(c)
		s2, dst := []float32{-5, 20, 20, 20, 20, 20, 20}, make([]float32, 7)
		d.Variance(dst, s2, 1, 1, 0.25)
		for j, got := range dst {
			want := 0.0
			for i, s := range s2 {
				a := inverseOf(c).At(j, i)
				want += a * a * float64(s)
			}
			require.InEpsilon(t, max(want, 0.25), got, 1e-6)
		}
		d.Variance(dst, s2, 1, 1, 100)
		for _, got := range dst {
			require.Equal(t, float32(100), got)
		}
		d.Variance(dst, []float32{1, 1, float32(math.NaN()), 1, 1, 1, 1}, 1, 1, 100)
		require.True(t, math.IsNaN(float64(dst[2])), "NaN is not floored away")
	}
}

// monteCarlo decodes n noisy readings of one scene, drawn by reading(i), and
// returns each column's sample variance and its standard error (from the
// fourth moment).
func monteCarlo(c *Code, n int, reading func(i int) float64) (variance, standardError []float64) {
	const pixels = 500
	d := NewDecoder(c)
	v := c.V()
	src, dst := make([]float32, v*pixels), make([]float32, v*pixels)
	samples := make([][]float64, v)
	for drawn := 0; drawn < n; drawn += pixels {
		for i := range v {
			for p := range pixels {
				src[i*pixels+p] = float32(reading(i))
			}
		}
		d.Decode(dst, src, pixels, pixels)
		for j := range v {
			for _, x := range dst[j*pixels : (j+1)*pixels] {
				samples[j] = append(samples[j], float64(x))
			}
		}
	}
	variance, standardError = make([]float64, v), make([]float64, v)
	for j, x := range samples {
		variance[j], standardError[j] = sampleVariance(x)
	}
	return variance, standardError
}

func sampleVariance(x []float64) (variance, standardError float64) {
	n, mean := float64(len(x)), 0.0
	for _, a := range x {
		mean += a / n
	}
	m2, m4 := 0.0, 0.0
	for _, a := range x {
		d := (a - mean) * (a - mean)
		m2 += d / n
		m4 += d * d / n
	}
	return m2 * n / (n - 1), math.Sqrt((m4 - m2*m2) / n)
}

// TestMonteCarloReadNoise: 20000 independent draws of readings with Gaussian
// noise of sigma 3 a code; fails beyond 5 standard errors in any column of the
// closed form and of Variance.
func TestMonteCarloReadNoise(t *testing.T) {
	const sigma = 3
	for _, c := range []*Code{
		mustCode(t, MSequence, 7), mustCode(t, MSequence, 31), mustCode(t, Legendre, 11), mustCode(t, Legendre, 23),
		mustCode(t, TwinPrime, 15), planarCode(t, 7), planarCode(t, 13), planarCode(t, 31), mustCode(t, SlitScan, 5),
	} {
		rng := rand.New(rand.NewPCG(101, uint64(c.V())))
		got, se := monteCarlo(c, 20000, func(int) float64 { return 500 + sigma*rng.NormFloat64() })
		want := sigma * sigma * c.Design().ReadNoiseVariance()
		s2, predicted := make([]float32, c.V()), make([]float32, c.V())
		for i := range s2 {
			s2[i] = sigma * sigma
		}
		NewDecoder(c).Variance(predicted, s2, 1, 1, 0)
		worst := 0.0
		for j := range got {
			require.InEpsilon(t, want, predicted[j], 1e-6)
			worst = max(worst, math.Abs(got[j]-want)/se[j])
		}
		t.Logf("%s %d: variance %.4f, worst column off by %.1f standard errors", c.Family(), c.V(), want, worst)
		require.Less(t, worst, 5.0)
	}
}

// TestMonteCarloPhotonNoise: 20000 independent draws of Poisson readings a
// scene, against PhotonVariance and against Variance of the expected readings;
// fails beyond 5 standard errors in any column. The v = 7 scenes are those of
// testdata/photon_vectors.csv.
func TestMonteCarloPhotonNoise(t *testing.T) {
	for _, x := range []struct {
		c *Code
		f []float64
	}{
		{mustCode(t, Legendre, 7), []float64{100, 100, 100, 100, 100, 100, 100}},
		{mustCode(t, Legendre, 7), []float64{700, 0, 0, 0, 0, 0, 0}},
		{mustCode(t, MSequence, 7), []float64{400, 50, 50, 50, 50, 50, 50}},
		{mustCode(t, MSequence, 7), []float64{175, 175, 0, 0, 0, 0, 350}},
		{planarCode(t, 7), []float64{400, 50, 10, 50, 0, 50, 90}},
		{planarCode(t, 13), []float64{900, 50, 10, 50, 0, 50, 90, 20, 30, 400, 10, 20, 60}},
		{mustCode(t, SlitScan, 3), []float64{20, 300, 90}},
	} {
		rng := rand.New(rand.NewPCG(202, uint64(x.c.V())))
		expected := make([]float32, x.c.V())
		for i := range expected {
			expected[i] = float32(mat.Dot(mat.NewVecDense(x.c.V(), x.f), matrixOf(x.c).RowView(i)))
		}
		got, se := monteCarlo(x.c, 20000, func(i int) float64 {
			return distuv.Poisson{Lambda: float64(expected[i]), Src: rng}.Rand()
		})
		predicted := make([]float32, x.c.V())
		NewDecoder(x.c).Variance(predicted, expected, 1, 1, 0)
		total, worst := 0.0, 0.0
		for _, e := range x.f {
			total += e
		}
		for j := range got {
			want := x.c.Design().PhotonVariance(x.f[j], total)
			require.InEpsilon(t, want, predicted[j], 1e-6)
			worst = max(worst, math.Abs(got[j]-want)/se[j])
		}
		t.Logf("%s %d %v: worst column off by %.1f standard errors", x.c.Family(), x.c.V(), x.f, worst)
		require.Less(t, worst, 5.0)
	}
}

// TestMeasuredGain: 20000 independent draws at v = 7 with read noise, decoded
// and as a slit scan; the ratio of the scatters is the published gain 1.51
// (Riesenberg 2003, Proc. SPIE, 16 May 2003, abstract), within its rounding and
// 5 standard errors.
func TestMeasuredGain(t *testing.T) {
	spread := func(c *Code, seed uint64) (variance, se float64) {
		rng := rand.New(rand.NewPCG(303, seed))
		got, errors := monteCarlo(c, 20000, func(int) float64 { return rng.NormFloat64() })
		for j := range got {
			variance += got[j] / float64(len(got))
			// The columns' errors are correlated: no gain from averaging is claimed.
			se += errors[j] / float64(len(got))
		}
		return variance, se
	}
	code, codeError := spread(mustCode(t, Legendre, 7), 1)
	slit, slitError := spread(mustCode(t, SlitScan, 7), 2)
	gain := math.Sqrt(slit / code)
	gainError := gain / 2 * math.Hypot(codeError/code, slitError/slit)
	t.Logf("measured gain %.4f +- %.4f, published 1.51", gain, gainError)
	require.InDelta(t, 1.51, gain, 0.005+5*gainError)
	require.Less(t, gainError, 0.02)
}
