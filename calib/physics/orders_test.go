package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Against the FFT of a sampled field of 8 x 8 mirrors, which shares no formula of orders.
func TestCrosscheckTaken(t *testing.T) {
	for _, c := range mirrorAnswersOf(t).Neighbour {
		got := c.array().Taken(c.Nm, c.beam())
		t.Logf("%+v: %.4f", c, got)
		require.InDelta(t, c.Taken, got, 0.003, "%+v", c)
	}
}

// A slow beam sees orders one by one: all of the light at a peak, and between two peaks none
// that a narrow pupil takes. A fast one washes them out, and a wide pupil too.
func TestBeamSpeedWashesOrdersOut(t *testing.T) {
	g := MirrorGrating{13.68, 12, 0}
	ripple := func(b Beam) float64 {
		top, bottom := g.Taken(g.OrderPeak(7), b), g.Taken(g.OrderPeak(1)/7.5, b)
		return (top - bottom) / top
	}
	require.InDelta(t, 1, g.Taken(g.OrderPeak(7), Beam{100, 1.3, 0}), 1e-3)
	require.Less(t, g.Taken(g.OrderPeak(1)/7.5, Beam{100, 1.3, 0}), 1e-3)
	before := 1.1
	for _, n := range []float64{40, 16, 8, 4, 2.4} {
		now := ripple(Beam{n, 1.15, 0.1})
		require.Less(t, now, before, "f/%g", n)
		before = now
	}
	require.Less(t, before, 0.08)
	require.Less(t, ripple(Beam{4, 2, 0}), ripple(Beam{4, 1.3, 0})/1.5)
	// A pupil that takes all angles takes all light.
	require.InDelta(t, 1, g.Taken(600, Beam{4, 5, 0}), 0.03)
	for _, bad := range []Beam{{0, 1, 0}, {4, 0.9, 0}, {4, 1, 1}, {4, 1, -0.1}, {4, math.NaN(), 0}} {
		require.True(t, math.IsNaN(g.Taken(600, bad)), "%+v", bad)
	}
	require.True(t, math.IsNaN(g.Taken(0, Beam{4, 1, 0})))
	require.True(t, math.IsNaN(MirrorGrating{1e6, 12, 0}.Taken(500, Beam{4, 1, 0})))
}
