package drawing

import (
	"testing"

	"github.com/stretchr/testify/require"
)

func TestRoundStep(t *testing.T) {
	for x, want := range map[float64]float64{1: 1, 1.99: 1, 2: 2, 4.9: 2, 5: 5, 9.9: 5, 10: 10, 0.3: 0.2, 450: 200} {
		require.InDelta(t, want, RoundStep(x), 1e-12)
	}
	require.Equal(t, []int{0, 20, 40, 60, 80, 100}, Ticks(110, 5))
	require.Equal(t, []int{0}, Ticks(0, 5))
}
