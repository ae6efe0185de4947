package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

// Good are all voxels without a bad flag; wanted those in fed rows that lie on the
// detector whole.
func TestQuality(t *testing.T) {
	// Two elements, the second without mirrors here; five voxels.
	use := []int16{0, product.FlagNoData}
	none := int16(product.FlagNoData)
	out := &outStrip{h: 1, flags: []int16{
		0, none,
		product.FlagBadPixel, none,
		product.FlagPartial, none,
		none | product.FlagPartial, none,
		product.FlagSaturated, none,
	}}
	var q rowQuality
	q.count(out, 0, 2, 5, use)
	q.dark, q.saturated = darkChi2{square: 24, variance: 20, terms: 10}, 3
	// The chi-squares of rows count by their terms, whatever their light: (10 1.2 +
	// 30 0.9)/40. A row without good pixels has none.
	bright := rowQuality{dark: darkChi2{square: 9e6, variance: 1e7, terms: 30}}
	sums, flags := sum([]rowQuality{q, {}, bright}, 10, false)
	require.InDelta(t, 0.1, sums.GoodFraction, 1e-12)
	require.InDelta(t, 1.0/3, sums.CoveredGoodFraction, 1e-12)
	require.InDelta(t, 0.975, *sums.DarkChi2Heldout, 1e-12)
	require.Equal(t, 3, sums.Saturated)
	require.Equal(t, int16(product.FlagBadPixel|product.FlagPartial|product.FlagNoData|product.FlagSaturated), flags)
	sums, _ = sum(nil, 0, false)
	require.Nil(t, sums.DarkChi2Heldout)
}
