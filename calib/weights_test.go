package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// The weights that are given are those with which Resample sums.
func TestResamplerWeightsAreThoseOfResample(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const columns = 40
		r, err := NewResampler(0, columns-1)
		require.NoError(t, err)
		row, variance := make([]float32, columns), make([]float32, columns)
		for x := range row {
			row[x] = rapid.Float32Range(-10, 100).Draw(t, "v")
			variance[x] = rapid.Float32Range(0.1, 100).Draw(t, "var")
		}
		from := rapid.Float64Range(-1, columns).Draw(t, "from")
		to := from + rapid.Float64Range(-12, 12).Draw(t, "width")
		var signal, own [1]float32
		var flags [1]Flag
		r.Resample(Voxels{signal[:], own[:], flags[:], 1}, row, variance, nil, []float64{from, to})
		first, w := r.Weights(nil, from, to)
		var sum, square float64
		for i, w := range w {
			sum += float64(w) * float64(row[first+i])
			square += float64(w) * float64(w) * float64(variance[first+i])
		}
		if flags[0]&NoData != 0 {
			return
		}
		require.InDelta(t, signal[0], sum, 2e-3)
		require.InDelta(t, own[0], square, 2e-3)
	})
}

func TestRowShiftWeightsAreThoseOfSignal(t *testing.T) {
	const columns, rows = 30, 24
	shift := make([]float64, columns)
	for x := range shift {
		shift[x] = 2.5*math.Sin(float64(x)/9) - 0.3
	}
	s, err := NewRowShift(shift, rows)
	require.NoError(t, err)
	all := make([][]float32, rows)
	for y := range all {
		all[y] = make([]float32, columns)
		for x := range all[y] {
			all[y][x] = float32(math.Sin(float64(7*y+3*x*x)) * 50)
		}
	}
	dst := make([]float32, columns)
	for y := range rows {
		s.Signal(dst, all, 0, y)
		for x := range dst {
			first, w := s.Weights(y, x)
			sum := 0.0
			for i, w := range w {
				sum += float64(w) * float64(all[first+i][x])
			}
			require.InDelta(t, dst[x], sum, 1e-4)
		}
	}
}
