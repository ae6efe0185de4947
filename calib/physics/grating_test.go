package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// Order peaks computed with numpy 1.24.2 from m L = d sin 24 deg, d = pitch/sqrt 2 (the lattice's
// turn: tutorials on micromirror diffraction; tilts of 12 degrees: Quijada et al., SPIE, on windows
// of micromirror devices; pitches of 13.68 and 10.8 um: common practice, no source).
func TestOrderPeaks(t *testing.T) {
	for _, c := range []struct {
		pitch, period, first float64 // um
		from                 int
		peaks                []float64 // nm
	}{
		{13.68, 9.673221, 3.934453, 4, []float64{983.613, 786.891, 655.742, 562.065, 491.807, 437.161, 393.445, 357.678}},
		{10.8, 7.636753, 3.106147, 3, []float64{1035.382, 776.537, 621.229, 517.691, 443.735, 388.268}},
	} {
		g := MirrorGrating{PitchUM: c.pitch, TiltDeg: 12}
		require.InDelta(t, c.period, g.PeriodUM(), 1e-6)
		require.InDelta(t, c.first*1000, g.OrderPeak(1), 1e-3)
		orders := g.Orders(350, 1100)
		require.Len(t, orders, len(c.peaks))
		for i, nm := range c.peaks {
			require.Equal(t, c.from+i, orders[i])
			require.InDelta(t, nm, g.OrderPeak(c.from+i), 1e-3)
			require.Equal(t, c.from+i, g.NearestOrder(nm+1))
		}
	}
	require.InDelta(t, 0.406736643, math.Sin(24/degreesPerRadian), 1e-9)
}

// On the blaze the grating equation holds at the mirrors' reflection, whatever the incidence;
// the peak is farthest where light returns to where it came from.
func TestGratingLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := MirrorGrating{rapid.Float64Range(3, 30).Draw(t, "pitch"), rapid.Float64Range(5, 20).Draw(t, "tilt"), rapid.Float64Range(-20, 40).Draw(t, "in")}
		m := rapid.IntRange(1, 12).Draw(t, "m")
		in, out := g.IncidenceDeg/degreesPerRadian, (2*g.TiltDeg-g.IncidenceDeg)/degreesPerRadian
		nm := g.OrderPeak(m)
		require.InDelta(t, float64(m)*nm/1000, g.PeriodUM()*(math.Sin(in)+math.Sin(out)), 1e-9)
		require.InDelta(t, float64(m), g.BlazeOrder(nm), 1e-9)
		require.GreaterOrEqual(t, MirrorGrating{g.PitchUM, g.TiltDeg, g.TiltDeg}.OrderPeak(m), nm)
		at := g.blaze(nm, 0)
		require.InDelta(t, float64(m), at.order, 1e-9)
		require.InDelta(t, 0, at.out(0), 1e-12)
	})
	g := MirrorGrating{13.7, 12, 0}
	require.Zero(t, g.NearestOrder(math.NaN()))
	require.Zero(t, MirrorGrating{13.7, 0, 0}.NearestOrder(500))
	require.Equal(t, 1, g.NearestOrder(20000))
	require.Empty(t, g.Orders(4100, 5000))
	require.Empty(t, g.Orders(0, 500))
	require.Len(t, MirrorGrating{1e4, 12, 0}.Orders(400, 800), 1000)
}
