package reduce

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// The table's polynomial gives the geometry's wavelength to 1e-5 px over the whole
// detector, for every element and row that mirrors feed and no other: sentinel rows
// have one, closed rows have none.
func TestDispersionTable(t *testing.T) {
	seq := smallSequence(t, instrument.Square, func(target *sequence.Target, p *instrument.Profile) {
		target.Closed = []sequence.ClosedRow{{First: 0, Last: 2}}
		target.SentinelRows = []sequence.SentinelRow{{First: 9, Last: 9, Element: 0}}
		p.Spectrograph.DispersionPxPerNM = [3]float64{2, 3e-3, -2e-5} // bent more than any of the profiles
	})
	g, u := nominalGeometry(seq), newUsage(seq)
	table, err := dispersionTable(g, nil, u, testColumns)
	require.NoError(t, err)
	elements, err := table.Int32s("ELEMENT")
	require.NoError(t, err)
	rows, err := table.Int32s("ROW")
	require.NoError(t, err)
	coef, err := table.Float64s("COEF")
	require.NoError(t, err)
	rms, err := table.Float64s("RMS_PX")
	require.NoError(t, err)
	reference, err := table.Header.Float("XREF")
	require.NoError(t, err)
	scale, err := table.Header.Float("XSCALE")
	require.NoError(t, err)
	require.Len(t, coef, dispersionTerms*len(rows))
	seen := map[[2]int32]bool{}
	for i, y := range rows {
		j := elements[i]
		seen[[2]int32{j, y}] = true
		require.True(t, math.IsNaN(rms[i]))
		for _, x := range []float64{0, 0.3, 7, 19.5, 31.2, testColumns - 1} {
			nm, power := 0.0, 1.0
			for _, c := range coef[i*dispersionTerms : (i+1)*dispersionTerms] {
				nm += c * power
				power *= (x - reference) / scale
			}
			require.InDelta(t, x, g.X(float64(j), float64(y), nm), 1e-5, "element %d row %d", j, y)
		}
	}
	require.Len(t, seen, len(rows))
	for y := range testRows {
		for j, f := range u.row(y) {
			fed := f&product.FlagNoData == 0 || f&product.FlagSentinel != 0
			require.Equal(t, fed, seen[[2]int32{int32(j), int32(y)}], "element %d row %d", j, y)
		}
	}
}
