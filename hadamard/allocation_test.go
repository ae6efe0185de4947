//go:build !race

// Under the race detector sync.Pool drops what it holds at random, so that
// there is nothing to count.

package hadamard

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// TestNothingIsAllocated once a decoder is warm.
func TestNothingIsAllocated(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 127), mustCode(t, Legendre, 103), planarCode(t, 21), mustCode(t, SlitScan, 40)} {
		for _, l := range levels() {
			d := newDecoder(c, l)
			const pixels = 3*lanes + 5
			src, dst := randomBlock(1, c.V(), pixels), make([]float32, c.V()*pixels)
			allocated := testing.AllocsPerRun(50, func() {
				d.Decode(dst, src, pixels, pixels)
				d.Predict(dst, src, pixels, pixels)
				d.Variance(dst, src, pixels, pixels, 0)
			})
			// A collection may empty the pool in the midst of the runs.
			require.Less(t, allocated, 1.0, "%s %d, %s", c.Family(), c.V(), l)
		}
	}
}

func TestApplyAllocatesNothing(t *testing.T) {
	r, err := mustChecks(t, mustCode(t, MSequence, 31), []int{1, 4, 5, 9}).Reweight(lostNoise(31, []int{3, 8}))
	require.NoError(t, err)
	block := randomBlock(1, 31, 40)
	require.Less(t, testing.AllocsPerRun(50, func() { r.Apply(block, 37, 40) }), 1.0)
}
