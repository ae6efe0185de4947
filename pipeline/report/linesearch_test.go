package report

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// searched runs a search over planes of places with noise of 2, a line of the sky at plane
// 70 and, where lit, a line in a tenth of the places at plane 40.
func searched(lit bool) (excess []float64, limit float64, sky []float64) {
	const planes, places = 120, 800
	random := rand.New(rand.NewPCG(7, 8))
	s := newLineSearch(planes)
	for l := range planes {
		signal, variance := make([]float64, places), make([]float64, places)
		for i := range places {
			signal[i] = 30 + 2*random.NormFloat64() + 100*math.Exp(-math.Pow(float64(l-70)/1.4, 2))
			if lit && i%10 == 0 {
				signal[i] += 12 * math.Exp(-math.Pow(float64(l-40)/1.4, 2))
			}
			variance[i] = 4
		}
		signal[5] = math.NaN()
		if l == 90 {
			signal[7] = 1e6 // a bad voxel makes no line
		}
		s.add(signal, variance)
		sky = append(sky, median(signal))
	}
	excess, limit = s.finish()
	return excess, limit, sky
}

func TestLineSearch(t *testing.T) {
	excess, limit, sky := searched(true)
	require.Equal(t, []int{40}, peaks(excess, limit, 3))
	require.Equal(t, []int{70}, skyLines(sky))
	excess, limit, _ = searched(false)
	require.Empty(t, peaks(excess, limit, 3))
	// Noise alone: mean 0, standard deviation sqrt(3/n), n = 799 (moments of the Gaussian).
	sum, square, n := 0.0, 0.0, 0.0
	for l := 10; l < 60; l++ {
		sum += excess[l]
		square += excess[l] * excess[l]
		n++
	}
	sigma := math.Sqrt(3.0 / 799)
	require.InDelta(t, 0, sum/n, 5*sigma/math.Sqrt(n/3)) // neighbours share what is beside them
	require.InDelta(t, sigma, math.Sqrt(square/n), 5*sigma/math.Sqrt(2*n))
}

func TestPeaks(t *testing.T) {
	//                       0  1  2  3  4  5  6  7  8  9 10 11 12 13 14 15
	require.Equal(t, []int{12, 2}, peaks([]float64{0, 3, 5, 3, 0, 0, 9, 0, 0, 0, 0, 6, 7, 6, 0, 0}, 4, 3)) // 6 is alone
	require.Equal(t, []int{3}, peaks([]float64{0, 0, 5, 6, 5, 0, 4.5, 5.5, 4.5, 0}, 4, 3))                 // too near
	require.Empty(t, peaks(nil, 1, 3))
	require.Equal(t, []int{1, 5}, middles([]bool{true, true, true, false, false, true}))
}
