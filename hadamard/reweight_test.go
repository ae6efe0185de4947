package hadamard

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// lostNoise is unit noise but for lost rows.
func lostNoise(v int, lost []int) []float64 {
	noise := make([]float64, v)
	for k := range noise {
		noise[k] = 1
	}
	for _, k := range lost {
		noise[k] = math.Inf(1)
	}
	return noise
}

// TestErasures: 200 random sets of lost rows for each of |K| = g/4, g/2 and 3g/4, with
// junk in the lost rows. Of full rank: the lit columns are unbiased, mean pull within
// 5 standard errors, and their rms error over all sets is as predicted within 1 %.
// Singular: a *SingularError that names rows whose marks are dependent, and Erasure
// says the same beforehand.
func TestErasures(t *testing.T) {
	for _, x := range []struct {
		f Family
		v int
	}{{MSequence, 63}, {MSequence, 127}, {Legendre, 59}} {
		c := mustCode(t, x.f, x.v)
		g := DefaultDark(x.v)
		set, err := ChooseDark(context.Background(), c, g, 1)
		require.NoError(t, err)
		checks := mustChecks(t, c, set.Columns)
		for _, n := range []int{g / 4, g / 2, 3 * g / 4} {
			eraseMany(t, checks, n, 200)
		}
	}
}

func eraseMany(t *testing.T, checks *Checks, lost, sets int) {
	c, g := checks.code, len(checks.columns)
	v := c.V()
	rng := rand.New(rand.NewPCG(uint64(v), uint64(lost)))
	singular := 0
	var growths []float64
	mean, square, n := 0.0, 0.0, 0.0
	for range sets {
		rows := rng.Perm(v)[:lost]
		rank, growth, err := checks.Erasure(rows)
		require.NoError(t, err)
		r, err := checks.Reweight(lostNoise(v, rows))
		if rank < lost {
			singular++
			require.True(t, math.IsInf(growth, 1))
			requireSingular(t, checks, err, lost, rank)
			continue
		}
		require.NoError(t, err)
		require.InEpsilon(t, growth, r.Growth, 1e-12)
		growths = append(growths, math.Sqrt(growth))
		m, s, k := erasurePulls(checks, r, rows, rng)
		mean, square, n = mean+m, square+s, n+k
	}
	// Pulls of a pixel's columns are correlated: they come from v readings.
	samples := float64(len(growths) * erasurePixels * (v - g))
	slices.Sort(growths)
	middle := math.NaN()
	if len(growths) > 0 {
		middle = growths[len(growths)/2]
		require.InDelta(t, 0, mean/n, 5/math.Sqrt(samples/10))
		require.InDelta(t, 1, math.Sqrt(square/n), 0.01+5*math.Sqrt(10/samples))
	}
	t.Logf("%s %d, g %d, %d lost: %d of %d singular; noise growth median %.3f; pull mean %.4f, rms %.4f",
		c.Family(), v, g, lost, singular, sets, middle, mean/n, math.Sqrt(square/n))
}

func requireSingular(t *testing.T, checks *Checks, err error, lost, rank int) {
	t.Helper()
	var e *SingularError
	require.True(t, errors.As(err, &e), "%v", err)
	require.Equal(t, []int{lost, rank}, []int{e.Lost, e.Rank})
	require.GreaterOrEqual(t, len(e.Rows), 2)
	got, _ := dependence(columnsOf(checks.darkRows(), e.Rows))
	require.Equal(t, len(e.Rows)-(lost-rank), got, "all dependences are among the rows named")
}

const erasurePixels = 40

// erasurePulls sums pulls and squared pulls of lit columns over pixels.
func erasurePulls(checks *Checks, r *Reweighting, lost []int, rng *rand.Rand) (sum, square, n float64) {
	c := checks.code
	v := c.V()
	light, y := make([]float32, v*erasurePixels), make([]float32, v*erasurePixels)
	dark := checks.isDark()
	for j := range v {
		for p := range erasurePixels {
			if !dark[j] {
				light[j*erasurePixels+p] = float32(10 * rng.ExpFloat64())
			}
		}
	}
	d := NewDecoder(c)
	d.Predict(y, light, erasurePixels, erasurePixels)
	for i := range y {
		y[i] += float32(rng.NormFloat64())
	}
	for _, k := range lost {
		for p := range erasurePixels {
			y[k*erasurePixels+p] = float32(1000 * rng.NormFloat64())
		}
	}
	f := make([]float32, v*erasurePixels)
	d.Decode(f, y, erasurePixels, erasurePixels)
	r.Apply(f, erasurePixels, erasurePixels)
	for j := range v {
		if dark[j] {
			continue
		}
		sigma := math.Sqrt(r.ColumnGrowth[j] * c.Design().ReadNoiseVariance())
		for p := range erasurePixels {
			pull := float64(f[j*erasurePixels+p]-light[j*erasurePixels+p]) / sigma
			sum, square, n = sum+pull, square+pull*pull, n+1
		}
	}
	return sum, square, n
}

// TestReweightLaws: the decode is blind to lost rows and exact on noiseless light; with
// equal noise it gains what the dark columns' noise tells of the others', next to
// nothing; dark columns keep their decodes but for lost rows.
func TestReweightLaws(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), planarCode(t, 21)} {
		v := c.V()
		checks := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
		for _, noise := range [][]float64{lostNoise(v, nil), lostNoise(v, []int{3, 8}), unequal(v, 4, 10), append([]float64{math.Inf(1)}, unequal(v, 3, 7)[1:]...)} {
			r, err := checks.Reweight(noise)
			require.NoError(t, err)
			var full, light mat.Dense
			full.Mul(r.T, checks.darkRows())
			full.Add(&full, c.inverse())
			light.Mul(&full, matrixOf(c))
			anyLost := false
			for k, n := range noise {
				if math.IsInf(n, 1) {
					anyLost = true
					for j := range v {
						require.InDelta(t, 0, full.At(j, k), 1e-12, "column %d sees lost row %d", j, k)
					}
				}
			}
			dark := checks.isDark()
			for j := range v {
				for i := range v {
					if !dark[i] {
						require.InDelta(t, map[bool]float64{true: 1}[i == j], light.At(j, i), 1e-11)
					}
				}
				if dark[j] {
					require.Zero(t, r.ColumnGrowth[j])
					if !anyLost {
						require.Zero(t, mat.Norm(r.T.Slice(j, j+1, 0, 7), 1))
					}
				}
			}
			if anyLost {
				require.True(t, math.IsInf(r.Gain, 1))
			} else {
				require.GreaterOrEqual(t, r.Gain, 1-1e-12)
			}
		}
	}
}

// unequal is noise with every step-th row times as noisy.
func unequal(v, step int, times float64) []float64 {
	noise := make([]float64, v)
	for k := range noise {
		noise[k] = 2
		if k%step == 0 {
			noise[k] *= times
		}
	}
	return noise
}

// TestReweightGrowth: against Monte Carlo, 4000 pixels of unequal noise: the variance of
// lit columns is as predicted within 3 % on average, and Gain below the plain decode's.
func TestReweightGrowth(t *testing.T) {
	c := mustCode(t, MSequence, 63)
	v := c.V()
	set, err := ChooseDark(context.Background(), c, 16, 1)
	require.NoError(t, err)
	checks := mustChecks(t, c, set.Columns)
	noise := unequal(v, 8, 25)
	r, err := checks.Reweight(noise)
	require.NoError(t, err)
	require.Greater(t, r.Gain, 1.5)
	const pixels = 4000
	rng := rand.New(rand.NewPCG(6, 6))
	y, f := make([]float32, v*pixels), make([]float32, v*pixels)
	mean := 0.0
	for k := range v {
		mean += noise[k] / float64(v)
		for p := range pixels {
			y[k*pixels+p] = float32(math.Sqrt(noise[k]) * rng.NormFloat64())
		}
	}
	NewDecoder(c).Decode(f, y, pixels, pixels)
	plain := litVariance(checks, f, pixels)
	r.Apply(f, pixels, pixels)
	got := litVariance(checks, f, pixels)
	require.InEpsilon(t, r.Growth*mean*c.Design().ReadNoiseVariance(), got, 0.03)
	require.InEpsilon(t, r.Gain, plain/got, 0.03)
	t.Logf("every eighth row 25 times as noisy: growth %.3f of the variance of equal noise, gain %.3f over the plain decode", r.Growth, r.Gain)
}

func litVariance(checks *Checks, f []float32, pixels int) float64 {
	sum, n := 0.0, 0.0
	for j, dark := range checks.isDark() {
		for p := range pixels {
			if !dark {
				x := float64(f[j*pixels+p])
				sum, n = sum+x*x, n+1
			}
		}
	}
	return sum / n
}

// TestApplyByPixel: a pixel's result depends neither on the block nor on its
// place.
func TestApplyByPixel(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	checks := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
	r, err := checks.Reweight(lostNoise(31, []int{3, 8}))
	require.NoError(t, err)
	const pixels, stride = 37, 40
	whole := randomBlock(1, 31, stride)
	single := slices.Clone(whole)
	r.Apply(whole, pixels, stride)
	for p := range pixels {
		r.Apply(single[p:], 1, stride)
	}
	require.Equal(t, whole, single)
}

func TestReweightRefuses(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	checks := mustChecks(t, c, []int{1, 4, 5, 9})
	for _, noise := range [][]float64{make([]float64, 30), make([]float64, 31), append([]float64{-1}, unequal(30, 3, 2)...),
		append([]float64{math.NaN()}, unequal(30, 3, 2)...), append([]float64{math.Inf(-1)}, unequal(30, 3, 2)...)} {
		_, err := checks.Reweight(noise)
		require.Error(t, err)
	}
	all := lostNoise(31, []int{0, 1, 2, 3, 4})
	_, err := checks.Reweight(all)
	requireSingular(t, checks, err, 5, 4)
	require.ErrorContains(t, err, "repeat 1 of them")
	rank, growth, err := checks.Erasure(nil)
	require.NoError(t, err)
	require.Equal(t, []float64{0, 1}, []float64{float64(rank), growth})
}
