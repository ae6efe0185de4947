package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Half-angles atan(1/2N) and, beside them, what the sine condition would give (computed with
// numpy 1.24.2; common practice, no source).
func TestBeamHalfAngle(t *testing.T) {
	for _, c := range [][3]float64{
		{2, 14.036243, 14.477512}, {3, 9.462322, 9.594068}, {4, 7.125016, 7.180756},
		{5, 5.710593, 5.739170}, {8, 3.576334, 3.583322}, {10, 2.862405, 2.865984},
	} {
		require.InDelta(t, c[1], BeamHalfAngle(c[0]), 1e-6)
		require.InDelta(t, c[2], math.Asin(math.Tan(BeamHalfAngle(c[0])/degreesPerRadian))*degreesPerRadian, 1e-6)
	}
	// Common practice, no source: axes 24 degrees apart, cones of less than 12 degrees.
	require.InDelta(t, 2.352315, FastestFNumber(12), 1e-6)
	require.InDelta(t, 12, BeamHalfAngle(FastestFNumber(12)), 1e-12)
	require.True(t, math.IsNaN(BeamHalfAngle(0)))
}

// Chords make up the beam: they add up to 1 and a pupil far off takes none.
func TestChords(t *testing.T) {
	for _, obscured := range []float64{0, 0.2} {
		b := Beam{4, 1.1, obscured}
		all, taken, missed := 0.0, 0.0, 0.0
		for _, c := range b.chords(16) {
			all += c.weight
			taken += c.weight * c.into(b.Oversize*b.radius(), -c.t, 0)
			missed += c.weight * c.into(b.Oversize*b.radius(), -c.t, 2.2*b.radius())
		}
		require.InDelta(t, 1, all, 1e-12)
		require.InDelta(t, 1, taken, 1e-12)
		require.Zero(t, missed)
	}
}
