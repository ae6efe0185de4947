package reduce

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// By hand.
func TestArcResiduals(t *testing.T) {
	all := []calib.ArcResidual{
		{Element: 3, FirstRow: 0, LastRow: 15, VacuumNM: 500, ResidualPx: 0.75, Kept: true},
		{Element: 3, FirstRow: 0, LastRow: 15, VacuumNM: 600, ResidualPx: -0.25, Kept: true},
		{Element: 3, FirstRow: 16, LastRow: 31, VacuumNM: 500, ResidualPx: 0.02, Kept: true},
		{Element: 9, FirstRow: 0, LastRow: 15, VacuumNM: 500, ResidualPx: 0.01, Kept: true},
		{Element: 9, FirstRow: 0, LastRow: 15, VacuumNM: 600, ResidualPx: 5},
	}
	require.Equal(t, []product.ArcPlace{
		{Element: 3, FirstRow: 0, LastRow: 15, Residual: product.Residual{MeanPx: 0.25, RMSPx: math.Sqrt(0.3125), Number: 2}},
		{Element: 3, FirstRow: 16, LastRow: 31, Residual: product.Residual{MeanPx: 0.02, RMSPx: 0.02, Number: 1}},
		{Element: 9, FirstRow: 0, LastRow: 15, Residual: product.Residual{MeanPx: 0.01, RMSPx: 0.01, Number: 1}},
	}, arcPlaces(all))
	lines := arcLineResiduals(all)
	require.Len(t, lines, 2)
	require.InDelta(t, 0.26, lines[0].MeanPx, 1e-12)
	require.Equal(t, 3, lines[0].Number)
	require.InDelta(t, -0.25, lines[1].MeanPx, 1e-12)
	require.Empty(t, arcPlaces(nil))

	// Many elements are summed up in neighbours.
	group := grouped([]int{1, 2, 3, 4, 5, 6, 7}, 3)
	require.Equal(t, map[int]int{1: 1, 2: 1, 3: 1, 4: 4, 5: 4, 6: 4, 7: 7}, group)
}

func TestDarkPulls(t *testing.T) {
	var c darkPulls
	w := &decodeWorker{decoded: []float32{0.1, 9, 0.6, -0.3, -100, 100}} // [column][pixel of 2]
	c.count(w, []int{0, 1, 2}, 0, 2, 0.1, 1)                             // 0, 0.5, -100.1
	require.Equal(t, int32(1), c[pullBins/2])
	require.Equal(t, int32(1), c[pullBins/2+2])
	require.Equal(t, int32(1), c[0])
	c.count(w, []int{0}, 0, 2, 0, 0) // no noise, no pull
	s := c.summary()
	require.Equal(t, 3, s.Number())
	require.Equal(t, -6.0, s.FirstSigma)
	require.Nil(t, new(darkPulls).summary())
}
