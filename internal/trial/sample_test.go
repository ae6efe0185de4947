package trial

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestSample(t *testing.T) {
	var s Sample
	require.True(t, math.IsNaN(s.Mean()))
	for _, x := range []float64{1, 2, 3, 6} {
		s.Add(x)
	}
	require.Equal(t, 4, s.N())
	require.InDelta(t, 3, s.Mean(), 1e-12)
	require.InDelta(t, math.Sqrt(12.5), s.RMS(), 1e-12)
	require.InDelta(t, math.Sqrt(14.0/3/4), s.StandardError(), 1e-12)
}
