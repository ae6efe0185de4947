package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

func flagsAt(columns int, bad ...int) []Flag {
	flags := make([]Flag, columns)
	for _, x := range bad {
		flags[x] = BadPixel
	}
	return flags
}

// By hand: Lagrange through +-1..4 at 0 has weights (56, -28, 8, -1)/70, through
// +-1, +-2 (4, -1)/6. A cubic is restored exactly.
func TestFillByHand(t *testing.T) {
	var f Fill
	f.Plan(flagsAt(9, 4), BadPixel)
	unit := make([]float32, 9)
	for x, want := range []float64{-1, 8, -28, 56, 0, 56, -28, 8, -1} {
		clear(unit)
		unit[x], unit[4] = 1, 99
		f.Signal(unit)
		if x != 4 {
			require.InDelta(t, want/70, unit[4], 1e-6)
		}
	}
	f.Plan(flagsAt(5, 2), BadPixel|Saturated)
	row := []float32{1, 8, float32(math.NaN()), 64, 125}
	f.Signal(row)
	require.InDelta(t, 27, row[2], 1e-4)
	variance := []float32{36, 9, 1e9, 9, 36}
	f.Variance(variance)
	require.InDelta(t, 2*(16*9+1*36)/36.0, variance[2], 1e-4)
}

func TestFillGapsAndEnds(t *testing.T) {
	for _, c := range []struct {
		name string
		bad  []int
		at   int
		want float64 // on the row 10 + 3 x
	}{
		{"two", []int{6, 7}, 7, 31},
		{"three", []int{5, 6, 7}, 6, 28},
		{"seven", []int{4, 5, 6, 7, 8, 9, 10}, 5, 25},
		{"sparse neighbours", []int{5, 7, 8, 10}, 7, 31},
		{"left end repeats", []int{0, 1}, 0, 16},
		{"right end repeats", []int{15}, 15, 52},
		{"next to the end", []int{1}, 1, 13},
	} {
		row, variance := make([]float32, 16), make([]float32, 16)
		for x := range row {
			row[x], variance[x] = 10+3*float32(x), 1
		}
		var f Fill
		flags := flagsAt(16, c.bad...)
		f.Plan(flags, BadPixel)
		for _, x := range c.bad {
			row[x], variance[x] = -1e6, 1e9
		}
		f.Signal(row)
		f.Variance(variance)
		require.InDelta(t, c.want, row[c.at], 1e-3, c.name)
		require.LessOrEqual(t, variance[c.at], float32(2), c.name)
	}
	var f Fill
	f.Plan(flagsAt(3, 0, 1, 2), BadPixel)
	row := []float32{1, 2, 3}
	f.Signal(row)
	require.Equal(t, []float32{0, 0, 0}, row, "nothing good to take from")
	f.Plan(flagsAt(3, 1), Saturated)
	row = []float32{1, 9, 3}
	f.Signal(row)
	require.Equal(t, []float32{1, 9, 3}, row, "not in the mask")
}

// A single bad pixel, filled: voxels that it does not void err by less than the
// design's 0.5 % of a line's peak for voxels of 1 px, whatever stood in it.
func TestFillLeavesGoodVoxelsGood(t *testing.T) {
	const columns, fwhm = 64, 3.0
	r := newResampler(t, columns)
	zero := make([]float32, columns)
	peak := math.Erf(0.5 * fwhmPerSigma / fwhm / math.Sqrt2)
	worst, voided := 0.0, 0
	for i := range 20 {
		centre := 30 + float64(i)/20
		for bad := 22; bad < 40; bad++ {
			row := gaussianRow(columns, centre, fwhm)
			row[bad] = 1e4
			bits := flagsAt(columns, bad)
			var f Fill
			f.Plan(bits, BadPixel)
			f.Signal(row)
			var flags RowFlags
			flags.Set(bits)
			for k := range 20 {
				edges := evenEdges(0.5+float64(k)/20, 1, 60)
				v := newVoxels(59)
				r.Resample(v, row, zero, &flags, edges)
				for n, got := range v.Signal {
					if v.Flags[n] != 0 {
						voided++
						continue
					}
					want := gaussianBelow(edges[n+1], centre, fwhm) - gaussianBelow(edges[n], centre, fwhm)
					worst = max(worst, math.Abs(float64(got)-want)/peak)
				}
			}
		}
	}
	t.Logf("voxels beside a filled pixel: worst error %.3f %% of the peak; %.2f voided a bad pixel", 100*worst, float64(voided)/(20*18*20))
	require.Less(t, worst, 0.005)
}

// The docs say that the variance of a voxel that a filled pixel reaches with less
// than 0.1 is off by at most 15 %: the exact variance is read off unit
// rows put through fill and resampling together.
func TestFillVarianceOfNeighbours(t *testing.T) {
	const columns, bad = 32, 16
	r := newResampler(t, columns)
	bits := flagsAt(columns, bad)
	var f Fill
	f.Plan(bits, BadPixel)
	var flags RowFlags
	flags.Set(bits)
	worst := 0.0
	for k := range 20 {
		edges := evenEdges(0.5+float64(k)/20, 1, 30)
		variance := make([]float32, columns)
		for x := range variance {
			variance[x] = 1
		}
		f.Variance(variance)
		v := newVoxels(29)
		r.Resample(v, variance, variance, &flags, edges)
		exact := make([]float64, 29)
		for x := range columns {
			unit := make([]float32, columns)
			unit[x] = 1
			f.Signal(unit)
			u := newVoxels(29)
			r.Resample(u, unit, unit, nil, edges)
			for i, w := range u.Signal {
				exact[i] += float64(w) * float64(w)
			}
		}
		for i := range exact {
			if v.Flags[i] == 0 {
				worst = max(worst, math.Abs(float64(v.Variance[i])/exact[i]-1))
			}
		}
	}
	t.Logf("variance of voxels beside a filled pixel: off by %.1f %% at most", 100*worst)
	require.Less(t, worst, 0.155)
}

func BenchmarkFill(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 2))
	flags := make([]Flag, 640)
	for range 12 {
		flags[rng.IntN(640)] = BadPixel
	}
	row := make([]float32, 640)
	var f Fill
	b.SetBytes(4 * 640)
	b.ReportAllocs()
	for b.Loop() {
		f.Plan(flags, BadPixel)
		f.Signal(row)
	}
}
