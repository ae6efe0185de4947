package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Listed and even wavelengths are at the columns that X gives.
func TestPlaces(t *testing.T) {
	g := Geometry{X_c: 500.3, Y_c: 40, X_e: 2, J_c: 10, L_c: 600, D: [3]float64{2, -1e-4, 1e-8}, SlitTilt: 0.01, Smile: 1e-5, TraceTilt: 0.01, TraceCurve: 1e-6}
	even := func(i float64) float64 { return 590 + 0.5*i }
	log := func(i float64) float64 { return 590 * math.Exp(i*0.5/590) }
	dst := make([]float64, 33)
	for name, w := range map[string]struct {
		list Wavelengths
		nm   func(float64) float64
	}{"even": {NewWavelengths(even, 0.5, -0.5, 33), even}, "log": {NewWavelengths(log, 0, -0.5, 33), log}} {
		require.Equal(t, 33, w.list.Count())
		for i, x := range g.Places(dst, 3, 51, w.list) {
			require.InDelta(t, g.X(3, 51, w.nm(float64(i)-0.5)), x, 1e-8, "%s %d", name, i)
		}
	}
	require.Empty(t, g.Places(nil, 3, 51, Wavelengths{}))
}
