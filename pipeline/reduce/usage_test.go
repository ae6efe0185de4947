package reduce

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

const sentinelVoid = product.FlagNoData | product.FlagSentinel

// Mirror row w lies at y_c + w_step (w - r_c) = 11.7 + 1.02 (w - 7.5): rows 4.05 to
// 19.35 for w = 0 to 15, so that detector rows 4 to 19 are fed.
func TestUsageOfASquareDevice(t *testing.T) {
	u := newUsage(smallSequence(t, instrument.Square, nil))
	require.Equal(t, 11, u.elements)
	for y := range testRows {
		want := int16(product.FlagNoData)
		if y >= 4 && y <= 19 {
			want = 0
		}
		for j, got := range u.row(y) {
			require.Equal(t, want, got, "row %d element %d", y, j)
		}
	}
}

// Rows closed for all, closed for one element, and a sentinel row, whose light
// reaches 0.5 + 3.2 rows on both sides.
func TestUsageOfClosedAndSentinelRows(t *testing.T) {
	one := 3
	u := newUsage(smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) {
		target.Closed = []sequence.ClosedRow{{First: 0, Last: 1}, {First: 3, Last: 3, Element: &one}}
		target.SentinelRows = []sequence.SentinelRow{{First: 12, Last: 12, Element: 2}}
	}))
	for y := range testRows {
		row := u.row(y)
		// Mirror rows lie 1.02 px apart: w = 7.5 + (y - 11.7)/1.02.
		w := int(math.Round(7.5 + (float64(y)-11.7)/1.02))
		middle := 11.7 + 1.02*(12-7.5) // of the sentinel's light, row 16.29
		for j := range row {
			want := int16(0)
			switch {
			case math.Abs(float64(y)-middle) < 0.51+0.5+3.2:
				want = sentinelVoid
			case w < 2 || w > 15 || w == 3 && j == one:
				want = product.FlagNoData
			}
			require.Equal(t, want, row[j], "row %d element %d", y, j)
		}
	}
}

// Mounted diagonally, an element has a voxel where one of its two u has a mirror in
// the row or the next: found by going through all mirrors of the device.
func TestUsageOfADiagonalDevice(t *testing.T) {
	seq := smallSequence(t, instrument.Diagonal, nil)
	u := newUsage(seq)
	p := seq.Profile
	type at struct{ u, w int }
	mirrors := map[at]bool{}
	for column := range p.DMD.Columns {
		for row := range p.DMD.Rows {
			mirrors[at{column + row, row - column}] = true
		}
	}
	fed := 0
	for y := range testRows {
		// r_c is the middle of w = -23..15.
		w := int(math.Round(-4 + (float64(y)-11.7)/p.Spectrograph.WStepPx))
		for j, column := range seq.ElementColumns() {
			strip := seq.Elements[column]
			has := false
			for v := strip.First; v <= strip.Last; v++ {
				for near := w - 1; near <= w+1; near++ {
					has = has || mirrors[at{v, near}] && (near == w || !mirrors[at{v, w}])
				}
			}
			if has && w >= -23 && w <= 15 {
				require.Zero(t, u.row(y)[j], "row %d element %d", y, j)
				fed++
			} else {
				require.Equal(t, int16(product.FlagNoData), u.row(y)[j], "row %d element %d", y, j)
			}
		}
	}
	require.Greater(t, fed, 100)
	require.Less(t, fed, testRows*u.elements)
}
