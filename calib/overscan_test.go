package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// A drifting bias of whole ADU, read noise 2.5 ADU, 16 overscan pixels: the level
// follows, its scatter is what it claims (N rows that share no pixels), and a hit
// does nothing.
func TestOverscanLevels(t *testing.T) {
	const rows, width = 34000, 16
	rng := rand.New(rand.NewPCG(2, 4))
	drift := func(y int) float64 { return 900 + 3*math.Sin(float64(y)/400) }
	block := make([]float32, rows*width)
	for i := range block {
		block[i] = float32(math.Round(drift(i/width) + 2.5*rng.NormFloat64()))
	}
	for i := 50; i < len(block); i += 1201 {
		block[i] = 30000
	}
	level, variance := make([]float64, rows), make([]float64, rows)
	require.NoError(t, DefaultOverscan(width).Levels(level, variance, block, 0))
	chi, n := 0.0, 0
	for y := 8; y < rows-8; y += 17 {
		d := level[y] - drift(y)
		chi += d * d / variance[y]
		n++
		// (2.5^2 + 1/12)/272 is 0.0233.
		require.InDelta(t, 0.0233, variance[y], 0.008)
	}
	t.Logf("scatter over claim: %.4f +- %.4f of %d", chi/float64(n), math.Sqrt(2/float64(n)), n)
	require.InDelta(t, 1, chi/float64(n), 5*math.Sqrt(2/float64(n)))
}

// With context, a level does not depend on the strip.
func TestOverscanStrips(t *testing.T) {
	const rows, width = 100, 4
	rng := rand.New(rand.NewPCG(5, 6))
	block := make([]float32, rows*width)
	for i := range block {
		block[i] = float32(rng.IntN(9))
	}
	o := DefaultOverscan(width)
	whole, wholeVar := make([]float64, rows), make([]float64, rows)
	require.NoError(t, o.Levels(whole, wholeVar, block, 0))
	for _, height := range []int{1, 7, 30} {
		for y := 0; y < rows; y += height {
			first, last := max(y-8, 0), min(y+height+8, rows)
			n := min(height, rows-y)
			level, variance := make([]float64, n), make([]float64, n)
			require.NoError(t, o.Levels(level, variance, block[first*width:last*width], y-first))
			require.Equal(t, whole[y:y+n], level)
			require.Equal(t, wholeVar[y:y+n], variance)
		}
	}
	require.ErrorContains(t, o.Levels(whole[:1], wholeVar[:1], block[:3], 0), "whole rows")
	require.ErrorContains(t, o.Levels(whole[:2], wholeVar[:2], block[:8], 1), "rows 1 to 2")
}

// Levels are what Clip gives of each window by itself: in noise, with hits, with a column
// that takes charge from the data, rows far off and pixels without a value.
func TestOverscanAgainstClip(t *testing.T) {
	const rows, width = 400, 32
	rng := rand.New(rand.NewPCG(8, 9))
	block := make([]float32, rows*width)
	for i := range block {
		block[i] = float32(math.Round(1012 + 2.3*rng.NormFloat64()))
		switch x, y := i%width, i/width; {
		case x == 0 && y >= 100 && y < 200:
			block[i] += 40
		case y >= 250 && y < 254:
			block[i] += 300
		case rng.IntN(300) == 0:
			block[i] += 5000
		case rng.IntN(300) == 0:
			block[i] = float32(math.NaN())
		}
	}
	for y := 330; y < 333; y++ {
		for x := range width {
			block[y*width+x] = float32(math.NaN())
		}
	}
	o := DefaultOverscan(width)
	level, variance := make([]float64, rows), make([]float64, rows)
	require.NoError(t, o.Levels(level, variance, block, 0))
	scratch := make([]float32, 17*width)
	for y := range rows {
		e := o.Clip.Mean(block[max(0, y-8)*width:min(rows, y+9)*width], scratch)
		require.InDelta(t, e.Mean, level[y], 1e-9, "row %d", y)
		require.InEpsilon(t, e.Variance, variance[y], 1e-9, "row %d", y)
	}
}

func BenchmarkOverscan(b *testing.B) {
	const rows, width = 64, 16
	rng := rand.New(rand.NewPCG(5, 6))
	block := make([]float32, rows*width)
	for i := range block {
		block[i] = float32(math.Round(900 + 2.5*rng.NormFloat64()))
	}
	level, variance := make([]float64, rows), make([]float64, rows)
	o := DefaultOverscan(width)
	b.SetBytes(4 * rows * width)
	for b.Loop() {
		_ = o.Levels(level, variance, block, 0)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/rows, "ns/row")
}
