package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Photon noise with a pattern of 0.4 % that is the same over blocks of 8 x 8: cells
// average the noise down to it and stop there.
func TestDepth(t *testing.T) {
	const elements, rows, voxels, levels = 10, 64, 64, 5
	rng := rand.New(rand.NewPCG(3, 3))
	pattern := make([]float64, elements*rows/8*voxels/8)
	for i := range pattern {
		pattern[i] = 0.004 * rng.NormFloat64()
	}
	flat, rough := NewDepth(elements, voxels, levels), NewDepth(elements, voxels, levels)
	signal, patterned := make([]float32, elements*voxels), make([]float32, elements*voxels)
	variance, expected, flags := make([]float32, elements*voxels), make([]float32, elements*voxels), make([]Flag, elements*voxels)
	for y := range rows {
		for l := range voxels {
			for j := range elements {
				i := l*elements + j
				expected[i], variance[i], flags[i] = 800, 37*37, 0
				noise := 37 * rng.NormFloat64()
				signal[i] = float32(800 + noise)
				patterned[i] = float32(800*(1+pattern[(y/8*voxels/8+l/8)*elements+j]) + noise)
				if (l+y+j)%97 == 0 {
					signal[i], patterned[i], flags[i] = 1e6, 1e6, BadPixel
				}
			}
		}
		flat.AddRow(signal, variance, expected, flags, 1, 1)
		rough.AddRow(patterned, variance, expected, flags, 1, 1)
	}
	require.Len(t, flat.Points(), levels)
	for k, p := range flat.Points() {
		q := rough.Points()[k]
		t.Logf("cells of %d: S/N %.0f, rms %.5f; with a pattern rms %.5f, excess %.5f +- %.5f", p.Side, p.SN, p.RMS, q.RMS, q.Excess, q.ExcessError)
		side := 1 << k
		require.Equal(t, side, p.Side)
		require.InEpsilon(t, 800.0/37*float64(side), p.SN, 0.02)
		require.InDelta(t, 1/p.SN, p.RMS, 5*p.RMSError)
		// The pattern averages down once cells are wider than its blocks.
		pattern := 0.004 * min(1, 8/float64(side))
		require.InDelta(t, pattern, q.Excess, 5*q.ExcessError+0.001)
	}
	require.Empty(t, NewDepth(2, 2, 2).Points())
	require.False(t, math.IsNaN(flat.Points()[0].Excess))
}
