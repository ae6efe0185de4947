package calib

import (
	"math"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestMedianAgainstSorting(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.SliceOfN(rapid.Float32Range(-5, 5), 1, 40).Draw(t, "v")
		if rapid.Bool().Draw(t, "ties") {
			for i := range v {
				v[i] = float32(math.Round(float64(v[i])))
			}
		}
		sorted := slices.Clone(v)
		slices.Sort(sorted)
		n := len(v)
		want := (float64(sorted[(n-1)/2]) + float64(sorted[n/2])) / 2
		require.Equal(t, want, median(v))
	})
}

// Counted or selected, both medians are those of sorting: of whole numbers that lie
// together, with hits among them, and of others.
func TestMediansAgainstSorting(t *testing.T) {
	middle := func(v []float64) float64 {
		slices.Sort(v)
		return (v[(len(v)-1)/2] + v[len(v)/2]) / 2
	}
	rapid.Check(t, func(t *rapid.T) {
		base := rapid.SampledFrom([]float32{0, -7, 1012, 65400, 1 << 25}).Draw(t, "base")
		spread := rapid.SampledFrom([]int{0, 3, 60, 200}).Draw(t, "spread")
		v := make([]float32, rapid.IntRange(1, 130).Draw(t, "n"))
		for i := range v {
			v[i] = base + float32(rapid.IntRange(-spread, spread).Draw(t, "v"))
		}
		switch rapid.IntRange(0, 2).Draw(t, "kind") {
		case 1:
			v[len(v)/2] += 0.25
		case 2:
			v[0] += 30000
		}
		sorted, away := make([]float64, len(v)), make([]float64, len(v))
		for i, x := range v {
			sorted[i] = float64(x)
		}
		want := middle(sorted)
		for i, x := range sorted {
			away[i] = float64(float32(math.Abs(x - want)))
		}
		centre, deviation := medians(v)
		require.Equal(t, want, centre)
		require.Equal(t, middle(away), deviation)
	})
}
