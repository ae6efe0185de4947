package extraction

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
)

// The errors of apertures are those that nights of different seeds show.
func TestAperturesScatterAsQuoted(t *testing.T) {
	const nights, first = 8, 7000
	s, err := MeasureApertures(t.Context(), t.TempDir(), true, nights, first)
	require.NoError(t, err)
	for _, line := range s.List() {
		t.Log(line)
	}
	// Five standard errors of eight nights.
	figures := Figures{Pooled: 0.06, Each: 0.19, Band: 0.43}
	require.True(t, trial.AllHold(s.Findings("stars", figures, 1)), s.Findings("stars", figures, 1))
	require.False(t, trial.AllHold(s.Findings("stars", figures, 0.9)))
}
