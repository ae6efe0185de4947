package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

const fieldColumns, fieldRows, fieldElements, fieldVoxels = 60, 24, 14, 40

// fieldEdges are edges of voxels of a pixel or so, rising or falling.
func fieldEdges(first, step float64) []float64 {
	edges := make([]float64, fieldVoxels+1)
	for i := range edges {
		edges[i] = first + step*float64(i)
	}
	return edges
}

func constant(n int, v float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = v
	}
	return x
}

// A shift of rows that is the same at all wavelengths is one of the trace.
func TestGatherIsARowShift(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		by := rapid.Float64Range(-9, 9).Draw(t, "by")
		tilt := rapid.Float64Range(-0.05, 0.05).Draw(t, "tilt")
		trace, sum := make([]float64, fieldColumns), make([]float64, fieldColumns)
		for x := range trace {
			trace[x] = tilt * float64(x-30)
			sum[x] = trace[x] + by
		}
		f, err := NewShiftField(trace, constant(fieldVoxels, 0), constant(fieldVoxels, by), fieldElements, fieldRows)
		require.NoError(t, err)
		plain, err := NewRowShift(sum, fieldRows)
		require.NoError(t, err)
		y0 := rapid.IntRange(0, fieldRows-1).Draw(t, "y0")
		step := rapid.SampledFrom([]float64{1.1, -1.1}).Draw(t, "step")
		g := f.NewGather()
		f.Set(g, y0, fieldEdges(30-20*step, step))
		first, last := f.Span(y0)
		low, high := plain.Span(y0)
		require.True(t, first <= low && last >= high && first >= 0 && last < fieldRows, "%d..%d holds %d..%d", first, last, low, high)
		rows, bits := make([][]float32, fieldRows), make([][]Flag, fieldRows)
		for y := range rows {
			rows[y], bits[y] = make([]float32, fieldColumns), make([]Flag, fieldColumns)
			for x := range rows[y] {
				rows[y][x] = float32(math.Sin(float64(3*x + 7*y)))
				if (x+5*y)%11 == 0 {
					bits[y][x] = BadPixel
				}
			}
		}
		want, got := make([]float32, fieldColumns), make([]float32, fieldColumns)
		var wantFlags, gotFlags RowFlags
		from, to := g.Columns()
		require.Greater(t, to-from, 40)
		plain.Signal(want, rows, 0, y0)
		g.Signal(got, rows[first:last+1], first)
		require.Equal(t, want[from:to], got[from:to])
		plain.Variance(want, rows, 0, y0)
		g.Variance(got, rows[first:last+1], first)
		require.Equal(t, want[from:to], got[from:to])
		plain.Flags(&wantFlags, bits, 0, y0)
		g.Flags(&gotFlags, bits[first:last+1], first)
		require.Equal(t, wantFlags.Bits[from:to], gotFlags.Bits[from:to])
	})
}

// Light that lies where the field says is found in its voxel: a Gaussian image whose place
// depends on the wavelength stands still.
func TestShiftFieldStandsStill(t *testing.T) {
	elements, rows := make([]float64, fieldVoxels), make([]float64, fieldVoxels)
	for l := range rows {
		elements[l], rows[l] = 1.7-0.09*float64(l), -1.1+0.07*float64(l)
	}
	f, err := NewShiftField(constant(fieldColumns, 0), elements, rows, fieldElements, fieldRows)
	require.NoError(t, err)
	edges := fieldEdges(9.5, 1) // every element's, for this test
	const sigma = 1.3
	image := func(d float64) float64 {
		return math.Erf((d+0.5)/sigma/math.Sqrt2) - math.Erf((d-0.5)/sigma/math.Sqrt2)
	}
	y0, g := 11, f.NewGather()
	first, last := f.Span(y0)
	spectra := make([][]float32, fieldElements)
	for s := range spectra {
		light := make([][]float32, fieldRows)
		for y := range light {
			light[y] = make([]float32, fieldColumns)
			for x := range light[y] {
				if l := x - 10; l >= 0 && l < fieldVoxels {
					light[y][x] = float32(image(float64(s)-7-elements[l]) * image(float64(y)-11.4-rows[l]))
				}
			}
		}
		f.Set(g, y0, edges)
		straight := make([]float32, fieldColumns)
		g.Signal(straight, light[first:last+1], first)
		spectra[s] = straight[10 : 10+fieldVoxels]
	}
	for j := 5; j <= 9; j++ {
		low, high := f.Sources(j)
		require.True(t, low >= 0 && high < fieldElements)
		dst := make([]float32, fieldVoxels)
		f.Mix(dst, spectra, 0, j)
		for l, v := range dst {
			require.InDelta(t, image(float64(j)-7)*image(11-11.4), float64(v), 0.006, "element %d voxel %d", j, l)
		}
	}
	// At the field's end there is no light to take.
	var flags RowFlags
	f.MixFlags(&flags, make2D[Flag](fieldElements, fieldVoxels), 0, fieldElements-1)
	require.NotZero(t, flags.Bits[0]&NoData) // 1.7 elements beyond
	require.Zero(t, flags.Bits[fieldVoxels-1]&NoData)
}

func make2D[T any](n, m int) [][]T {
	all := make([][]T, n)
	for i := range all {
		all[i] = make([]T, m)
	}
	return all
}

func TestShiftFieldRefusals(t *testing.T) {
	_, err := NewShiftField(constant(9, 0), constant(3, 0), constant(4, 0), 20, 20)
	require.Error(t, err)
	_, err = NewShiftField(constant(9, 0), constant(3, 0), constant(3, 0), 7, 20)
	require.ErrorContains(t, err, "plan more elements")
	_, err = NewShiftField(constant(9, 0), constant(3, math.NaN()), constant(3, 0), 20, 20)
	require.Error(t, err)
}
