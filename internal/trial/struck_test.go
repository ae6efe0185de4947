package trial

import (
	"errors"
	"os"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// The single-frame search of struck pixels beside astroscrappy, on a slit scan with a
// read noise of 100 e, where many hits are faint.
func TestCrosscheckStruck(t *testing.T) {
	f, err := Tiny()
	require.NoError(t, err)
	f.Undarken("slit-scan", 100)
	findings, err := f.CompareStruck(t.Context(), t.TempDir(), "slit scan", 71, 10, 1)
	if errors.Is(err, outside.ErrMissing) && os.Getenv("CI") != "true" {
		t.Skip(err)
	}
	require.NoError(t, err)
	for _, f := range findings {
		t.Log(f)
		require.True(t, f.OK, f.String())
	}
}

// What the counts of a catch mean, on one frame of 6 x 6 pixels.
func TestStruckJudge(t *testing.T) {
	s := &Struck{Width: 6, Rows: 6, Height: [][]float64{make([]float64, 36)}}
	s.Height[0][0], s.Height[0][1], s.Height[0][2] = 4, 6, 9
	found := [][]bool{make([]bool, 36)}
	found[0][0], found[0][2], found[0][8], found[0][35] = true, true, true, true
	c := s.Judge(found, 0)
	require.Equal(t, Catch{Samples: 36, Struck: [2]int{2, 1}, Found: [2]int{1, 1}, Beside: 1, Alone: 1}, c)
	require.Equal(t, 0.5, c.Share(0))
	require.Equal(t, Catch{Samples: 16, Beside: 1}, s.Judge(found, 1))
	other := [][]bool{make([]bool, 36)}
	other[0][1], other[0][2] = true, true
	share, either := s.Agreement(found, other, 0)
	require.Equal(t, 3, either)
	require.InDelta(t, 1.0/3, share, 1e-15)
}
