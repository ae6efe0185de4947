package extraction

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
)

// The errors of apertures in combined cubes are those that pairs of nights of different
// seeds show.
func TestCombinedAperturesScatterAsQuoted(t *testing.T) {
	const pairs, first = 8, 7100
	s, err := MeasureCombined(t.Context(), t.TempDir(), true, pairs, first)
	require.NoError(t, err)
	for _, line := range s.List() {
		t.Log(line)
	}
	// Five standard errors of eight pairs, as of eight nights.
	figures := Figures{Pooled: 0.06, Each: 0.19, Band: 0.43}
	for _, f := range s.Findings("combined", figures, 1) {
		t.Log(f)
		require.True(t, f.OK, f)
	}
	require.False(t, trial.AllHold(s.Findings("combined", figures, 0.9)))
}
