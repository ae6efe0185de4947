package trial

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// A finding fails beyond its figure or 5 standard errors, whichever is larger, and
// where nothing was measured.
func TestFindings(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name string
		got  Finding
		ok   bool
	}{
		{"within the figure", Near("", 1.019, 1, 0.02, 0.001, 10), true},
		{"beyond the figure", Near("", 1.021, 1, 0.02, 0.001, 10), false},
		{"beyond it below", Near("", 0.979, 1, 0.02, 0.001, 10), false},
		{"within 5 standard errors", Near("", 1.049, 1, 0.02, 0.01, 10), true},
		{"beyond 5 standard errors", Near("", 1.051, 1, 0.02, 0.01, 10), false},
		{"no number", Near("", nan, 1, 0.02, 0.01, 10), false},
		{"no sample", Near("", 1, 1, 0.02, 0.01, 0), false},
		{"below", Below("", 0.9, 1, 1), true},
		{"not below", Below("", 1, 1, 1), false},
		{"below, no number", Below("", nan, 1, 1), false},
		{"at least", AtLeast("", 1, 1, 1), true},
		{"less", AtLeast("", 0.99, 1, 1), false},
		{"at least, no number", AtLeast("", nan, 1, 1), false},
		{"must fail and does", MustFail("", []Finding{{OK: true}, {OK: false}}), true},
		{"must fail and does not", MustFail("", []Finding{{OK: true}}), false},
	} {
		require.Equal(t, c.ok, c.got.OK, c.name)
	}
	require.False(t, AllHold(nil))
	require.True(t, AllHold([]Finding{{OK: true}}))
	require.False(t, AllHold([]Finding{{OK: true}, {OK: false}}))
	require.Contains(t, Near("x", 2, 1, 0.1, 0, 3).String(), "FAILS")
}

func TestMoments(t *testing.T) {
	var a, b Moments
	for _, x := range []float64{1, 2, 3} {
		a.Add(x)
	}
	b.Add(6)
	a.Merge(b)
	require.Equal(t, 4, a.N)
	require.InDelta(t, 3, a.Mean(), 1e-12)
	require.InDelta(t, math.Sqrt(3.5), a.Std(), 1e-12)
}
