package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestToElectronsAndSubtract(t *testing.T) {
	values := []float32{1000, 1010, 65535}
	ToElectrons(values, 1000, 1.5)
	require.Equal(t, []float32{0, 15, 96802.5}, values)
	Subtract(values, []float32{1, 2, 0.5, 9}, 2)
	require.Equal(t, []float32{-2, 11, 96801.5}, values)
}

// Read noise 4 e and gain 6 e/ADU, rounded to whole ADU: the scatter of N values
// against 4^2 + 6^2/12 = 19 (exactly so only for noise well above one ADU's share;
// at 4/6 ADU the rest is below 1e-3).
func TestReadVariance(t *testing.T) {
	require.Equal(t, 19.0, ReadVariance(4, 6))
	const n = 200000
	rng := rand.New(rand.NewPCG(1, 8))
	sum, square := 0.0, 0.0
	for range n {
		e := 6 * math.Round((4*rng.NormFloat64()+rng.Float64()*60)/6)
		sum += e
		square += e * e
	}
	// The uniform pedestal of 60 e, which spreads the phases, adds 300.
	variance := square/n - sum*sum/n/n - 300
	require.InDelta(t, ReadVariance(4, 6), variance, 5*320*math.Sqrt(2.0/n))
}

func TestFlagSaturated(t *testing.T) {
	flags := []Flag{BadPixel, 0, 0, 0}
	n := FlagSaturated(flags, []float32{65535, 59999, 60000, float32(math.NaN())}, 60000)
	require.Equal(t, 2, n)
	require.Equal(t, []Flag{BadPixel | Saturated, 0, Saturated, 0}, flags)
}
