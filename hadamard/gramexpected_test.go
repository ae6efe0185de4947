package hadamard

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// AddExpected is the mean of Add on drawn pixels: two kinds of pixel of unequal rows, 20000
// drawn of each; every entry within 5 standard errors of its own noise (readings of a pixel
// have known variances, so that the variance of a product is known).
func TestExpectedGramIsTheMean(t *testing.T) {
	const v, count = 7, 20000
	light := []float64{3, 9, 5, 0, 12, 40, 7, 2, 1, 1, 30, 20, 8, 15} // [row][pixel]
	variances := make([]float64, len(light))
	for i, y := range light {
		variances[i] = 4 + y
	}
	expected, drawn := NewGram(v), NewGram(v)
	expected.AddExpected(light, variances, []int{count, count})
	rng := rand.New(rand.NewPCG(3, 1))
	y, s2 := make([]float32, v*2*count), make([]float32, v*2*count)
	for i, m := range light {
		for k := range count {
			y[i*count+k], s2[i*count+k] = float32(m+math.Sqrt(variances[i])*rng.NormFloat64()), float32(variances[i])
		}
	}
	drawn.Add(y, s2, 2*count, 2*count, 0)
	require.Equal(t, drawn.Pixels, expected.Pixels)
	mean := [2]float64{}
	for i := range light {
		mean[i%2] += variances[i] / v
	}
	got, want := drawn.Sum(), expected.Sum()
	for i := range v {
		require.InEpsilon(t, drawn.Noise()[i], expected.Noise()[i], 1e-5)
		for j := i; j < v; j++ {
			spread := 0.0
			for p := range 2 {
				a, b := i*2+p, j*2+p
				own := variances[a]*variances[b] + light[a]*light[a]*variances[b] + light[b]*light[b]*variances[a]
				if i == j {
					own = 2*variances[a]*variances[a] + 4*light[a]*light[a]*variances[a]
				}
				spread += count * own / (mean[p] * mean[p])
			}
			require.InDelta(t, want.At(i, j), got.At(i, j), 5*math.Sqrt(spread))
		}
	}
	empty := NewGram(v)
	empty.AddExpected(make([]float64, v), make([]float64, v), []int{3})
	require.Equal(t, 3, empty.Skipped)
	require.Zero(t, empty.Pixels)
}
