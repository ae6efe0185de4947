package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// gappedRow is 15 mirrors in a row, of which the eighth is missing, each datum the sum of
// three neighbours, one of all: the light that is missing from it.
func gappedRow(length float64) (*MissingLight, *mat.Cholesky, func(light []float64) (data []float64, missing float64)) {
	const mirrors, gap = 15, 7
	weight := func(i, m int) float64 {
		if m == gap || m < i || m > i+2 {
			return 0
		}
		return 0.5 - 0.2*math.Abs(float64(m-i-1))
	}
	k := mat.NewSymDense(mirrors, nil)
	for a := range mirrors {
		for b := a; b < mirrors; b++ {
			k.SetSym(a, b, math.Exp(-float64((a-b)*(a-b))/(2*length*length)))
		}
		k.SetSym(a, a, 1+1e-9)
	}
	const data = mirrors - 2
	p := &MissingLight{Data: mat.NewSymDense(data, nil), TargetWeight: 0.5, TargetVariance: 0.25}
	for i := range data {
		sum, target := 0.0, 0.0
		for m := range mirrors {
			sum += weight(i, m)
			target += weight(i, m) * 0.5 * k.At(m, gap)
		}
		p.Weight, p.Target = append(p.Weight, sum), append(p.Target, target)
		for j := i; j < data; j++ {
			c := 0.0
			for m := range mirrors {
				for n := range mirrors {
					c += weight(i, m) * weight(j, n) * k.At(m, n)
				}
			}
			p.Data.SetSym(i, j, c)
		}
	}
	var root mat.Cholesky
	if !root.Factorize(k) {
		panic("internal error: the covariance is not positive")
	}
	return p, &root, func(light []float64) ([]float64, float64) {
		seen := make([]float64, data)
		for i := range seen {
			for m, v := range light {
				seen[i] += weight(i, m) * v
			}
		}
		return seen, 0.5 * light[gap]
	}
}

// Over 4000 random fields the estimate misses by what it says, and by less than the mean
// of the data does; a level, whatever it is, is found exactly.
func TestMissingLight(t *testing.T) {
	const fields, level, strength = 4000, 300.0, 20.0
	rng := rand.New(rand.NewPCG(3, 10))
	for _, noise := range []float64{1e-4, 0.01, 1} {
		p, root, see := gappedRow(1.8)
		c, structure, ok := p.Weights(noise)
		require.True(t, ok)
		even, missing := see(fill(15, level))
		require.InDelta(t, missing, sumProduct(c, even), 1e-6*level)

		variance := structure
		for _, v := range c {
			variance += noise * v * v
		}
		var lower mat.TriDense
		root.LTo(&lower)
		var square, mean float64
		for range fields {
			var g mat.VecDense
			g.MulVec(&lower, mat.NewVecDense(15, normals(rng, 15)))
			light := make([]float64, 15)
			for m := range light {
				light[m] = level + strength*g.AtVec(m)
			}
			data, missing := see(light)
			sum := 0.0
			for i := range data {
				data[i] += strength * math.Sqrt(noise) * rng.NormFloat64()
				sum += data[i] / p.Weight[i] / float64(len(data))
			}
			square += math.Pow((sumProduct(c, data)-missing)/strength, 2) / fields
			mean += math.Pow((0.5*sum-missing)/strength, 2) / fields
		}
		t.Logf("noise %g: error %.5f, said %.5f, of the mean %.5f", noise, square, variance, mean)
		// The standard error of a variance is sqrt(2/N) of it.
		require.InDelta(t, 1, square/variance, 5*math.Sqrt(2.0/fields))
		require.Less(t, square, mean)
	}
}

// Without data nothing is estimated.
func TestMissingLightWithoutData(t *testing.T) {
	p := &MissingLight{Data: mat.NewSymDense(2, nil), Target: make([]float64, 2), Weight: make([]float64, 2), TargetWeight: 1, TargetVariance: 1}
	_, _, ok := p.Weights(1)
	require.False(t, ok)
	_, _, ok = new(MissingLight).Weights(1)
	require.False(t, ok)
}

func fill(n int, v float64) []float64 {
	list := make([]float64, n)
	for i := range list {
		list[i] = v
	}
	return list
}

func normals(rng *rand.Rand, n int) []float64 {
	list := make([]float64, n)
	for i := range list {
		list[i] = rng.NormFloat64()
	}
	return list
}

func sumProduct(a, b []float64) float64 {
	sum := 0.0
	for i, v := range a {
		sum += v * b[i]
	}
	return sum
}
