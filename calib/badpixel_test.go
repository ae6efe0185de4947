package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// where lists the flagged pixels.
func where(flags []Flag, width int) [][2]int {
	var out [][2]int
	for i, f := range flags {
		if f&BadPixel != 0 {
			out = append(out, [2]int{i % width, i / width})
		}
	}
	return out
}

// A dark with a glow at one side, noise 4 e, hot pixels of 150 e and a hot column:
// all are found and nothing else.
func TestHotRule(t *testing.T) {
	const width, rows = 96, 60
	rng := rand.New(rand.NewPCG(1, 1))
	dark := make([]float32, width*rows)
	for i := range dark {
		dark[i] = float32(20 + 40*math.Exp(-float64(i%width)/20) + 4*rng.NormFloat64())
	}
	want := map[[2]int]bool{{0, 0}: true, {95, 30}: true, {40, 20}: true, {41, 20}: true, {13, 59}: true}
	for y := range rows {
		want[[2]int{70, y}] = true
	}
	for p := range want {
		dark[p[1]*width+p[0]] += 150
	}
	dark[5*width+5] = float32(math.NaN())
	want[[2]int{5, 5}] = true
	flags := make([]Flag, len(dark))
	flags[7] = Saturated
	n, err := DefaultHotRule(1).Flag(flags, dark, width)
	require.NoError(t, err)
	require.Equal(t, len(want), n)
	for _, p := range where(flags, width) {
		require.True(t, want[p], "%v", p)
	}
	require.Equal(t, Saturated, flags[7])
	_, err = DefaultHotRule(1).Flag(flags, dark, 97)
	require.ErrorContains(t, err, "rows of 97")
}

// A lamp flat of a slit that lights rows 10 to 49 and a band with a steep edge: a
// dead column, a dead row, single pixels and a cluster are found; unlit rows, the
// slit's ends and the band's edges are not.
func TestDeadRule(t *testing.T) {
	const width, rows = 120, 60
	rng := rand.New(rand.NewPCG(6, 6))
	flat := make([]float32, width*rows)
	for i := range flat {
		x, y := float64(i%width), i/width
		light := 0.0
		if y >= 10 && y < 50 {
			light = 10000 / (1 + math.Exp((20-x)/1.5)) * (1 + 0.2*math.Sin(x/9))
		}
		flat[i] = float32(light + math.Sqrt(light+25)*rng.NormFloat64())
	}
	want := map[[2]int]bool{{60, 20}: true, {100, 49}: true, {80, 30}: true, {81, 30}: true, {80, 31}: true, {81, 31}: true}
	for p := range want {
		flat[p[1]*width+p[0]] *= 0.3
	}
	for y := range rows {
		if y >= 10 && y < 50 {
			want[[2]int{50, y}] = true
		}
		flat[y*width+50] *= 0.05
	}
	for x := range width {
		if x >= 19 {
			want[[2]int{x, 40}] = true
		}
		flat[40*width+x] *= 0.1
	}
	flags := make([]Flag, len(flat))
	n, err := DefaultDeadRule(500).Flag(flags, flat, width)
	require.NoError(t, err)
	got := map[[2]int]bool{}
	for _, p := range where(flags, width) {
		got[p] = true
		if p[1] == 40 && p[0] < 19 {
			continue // in the band's foot, where the dead row's own light decides
		}
		require.True(t, want[p], "pixel %v is not dead", p)
	}
	for p := range want {
		require.True(t, got[p], "pixel %v is dead", p)
	}
	require.Len(t, got, n)
}

func TestDeadRuleKeepsHealthyFlat(t *testing.T) {
	const width, rows = 64, 32
	flat := make([]float32, width*rows)
	for i := range flat {
		flat[i] = 1000 * float32(1+0.5*math.Sin(float64(i%width)/6)) // falls by 3 in 19 px
	}
	flags := make([]Flag, len(flat))
	n, err := DefaultDeadRule(100).Flag(flags, flat, width)
	require.NoError(t, err)
	require.Zero(t, n)
	flat[100] = float32(math.NaN())
	n, err = DefaultDeadRule(100).Flag(flags, flat, width)
	require.NoError(t, err)
	require.Equal(t, 1, n)
}
