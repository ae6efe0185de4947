package calib

import (
	"testing"

	"github.com/stretchr/testify/require"
)

func TestLinearise(t *testing.T) {
	// 20000 (1 + 1e-6 20000 + 2e-11 20000^2) = 20000 x 1.028.
	values := []float32{0, 20000, -100}
	Linearise(values, []float64{1e-6, 2e-11})
	require.InDeltaSlice(t, []float64{0, 20560, -99.99002}, []float64{float64(values[0]), float64(values[1]), float64(values[2])}, 1e-2)
	Linearise(values, nil)
	require.InDelta(t, 20560, values[1], 1e-2)
	// The derivative by differences.
	for _, m := range []float64{0, 300, 20000} {
		pair := []float32{float32(m - 64), float32(m + 64)}
		Linearise(pair, []float64{1e-6, 2e-11})
		slope := float64(pair[1]-pair[0]) / 128
		require.InDelta(t, slope*slope, LinearityVariance(m, []float64{1e-6, 2e-11}), 1e-4)
	}
	require.Equal(t, 1.0, LinearityVariance(5, nil))
}
