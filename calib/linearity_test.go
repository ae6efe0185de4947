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
}
