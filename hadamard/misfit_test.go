package hadamard

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// TestMisfitMeetsResidual: y'Py by its definition, for every kind of checks and any
// width of block; the exact form against the pixel's covariance multiplied out.
func TestMisfitMeetsResidual(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), planarCode(t, 21)} {
		v := c.V()
		base := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
		less, err := base.WithoutRows([]int{3, 8})
		require.NoError(t, err)
		one := mustChecks(t, c, []int{4}).WithoutPedestal()
		for _, checks := range []*Checks{base, base.WithoutPedestal(), less, less.WithoutPedestal(), one} {
			for _, pixels := range []int{1, lanes, lanes + 5} {
				stride := pixels + 3
				y, s2 := randomBlock(7, v, stride), randomBlock(8, v, stride)
				decoded := make([]float32, v*stride)
				NewDecoder(c).Decode(decoded, y, pixels, stride)
				misfit, expected := make([]float32, pixels), make([]float32, pixels)
				checks.Misfit(misfit, expected, decoded, s2, pixels, stride)
				for p := range pixels {
					pixel, noise := mat.NewVecDense(v, nil), 0.0
					for k := range v {
						pixel.SetVec(k, float64(y[k*stride+p]))
						noise += checks.projector.At(k, k) * float64(s2[k*stride+p])
					}
					want := mat.Inner(pixel, checks.projector, pixel)
					require.InDelta(t, want, misfit[p], 1e-3*want+0.01)
					require.InDelta(t, noise, expected[p], 1e-6*noise)
				}
			}
		}
		_, err = one.ExactMisfit(make([]float64, v), unequal(v, 3, 2))
		require.ErrorIs(t, err, ErrNoChecks)
		_, err = base.ExactMisfit(make([]float64, v), make([]float64, v))
		require.ErrorIs(t, err, errNoNoise)

		y, s2 := mat.Col(nil, 0, randomColumn(v)), unequal(v, 3, 4)
		got, err := base.ExactMisfit(y, s2)
		require.NoError(t, err)
		var r mat.VecDense
		r.MulVec(base.darkRows(), mat.NewVecDense(v, y))
		var covariance, inverse mat.Dense
		covariance.Product(base.darkRows(), mat.NewDiagDense(v, s2), base.darkRows().T())
		require.NoError(t, inverse.Inverse(&covariance))
		require.InEpsilon(t, mat.Inner(&r, &inverse, &r)/7, got, 1e-9)
	}
}

func randomColumn(v int) *mat.Dense {
	out := mat.NewDense(v, 1, nil)
	for k, x := range randomBlock(9, v, 1) {
		out.Set(k, 0, float64(x))
	}
	return out
}

// TestMisfitScatter: 2500 pixels of noise each; mean q is 1 within 5 standard errors for
// the exact and the cheap form, and the cheap one scatters as MisfitDeviation says within
// 10 % (5 standard errors of a deviation from 2500 draws).
func TestMisfitScatter(t *testing.T) {
	c := mustCode(t, MSequence, 63)
	v := c.V()
	set, err := ChooseDark(context.Background(), c, 16, 1)
	require.NoError(t, err)
	checks := mustChecks(t, c, set.Columns)
	star, stars := make([]float64, v), make([]float64, v)
	lit := checks.isDark()
	for j, seen := 0, 0; j < v && seen < 3; j++ {
		if lit[j] {
			continue
		}
		for k := range v {
			if seen == 0 {
				star[k] = 0.01 + float64(c.Bit(k, j))
			}
			stars[k] += 0.01 + float64(c.Bit(k, j))
		}
		seen++
	}
	t.Log("noise of readings             exact sd   cheap sd   of sqrt(2/g)")
	for _, x := range []struct {
		name string
		s2   []float64
	}{{"equal", unequal(v, 1, 1)}, {"every eighth row 10 times", unequal(v, 8, 10)}, {"photons of three stars", stars}, {"photons of one star", star}} {
		const draws = 2500
		rng := rand.New(rand.NewPCG(4, 4))
		var mean, square [2]float64
		y, decoded, s2 := make([]float32, v), make([]float32, v), make([]float32, v)
		misfit, expected, wide := make([]float32, 1), make([]float32, 1), make([]float64, v)
		d := NewDecoder(c)
		for range draws {
			for k, s := range x.s2 {
				wide[k] = math.Sqrt(s) * rng.NormFloat64()
				y[k], s2[k] = float32(wide[k]), float32(s)
			}
			exact, err := checks.ExactMisfit(wide, x.s2)
			require.NoError(t, err)
			d.Decode(decoded, y, 1, 1)
			checks.Misfit(misfit, expected, decoded, s2, 1, 1)
			for i, q := range []float64{exact, float64(misfit[0] / expected[0])} {
				mean[i], square[i] = mean[i]+q/draws, square[i]+q*q/draws
			}
		}
		var sd [2]float64
		for i := range sd {
			sd[i] = math.Sqrt(square[i] - mean[i]*mean[i])
			require.InDelta(t, 1, mean[i], 5*sd[i]/math.Sqrt(draws))
		}
		require.InEpsilon(t, math.Sqrt(2.0/16), sd[0], 0.1)
		require.InEpsilon(t, checks.MisfitDeviation(x.s2), sd[1], 0.1)
		require.Less(t, sd[1], 1.5*sd[0])
		t.Logf("%-28s  %8.4f   %8.4f   %.3f", x.name, sd[0], sd[1], sd[1]/math.Sqrt(2.0/16))
	}
}
