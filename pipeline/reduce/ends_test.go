package reduce

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// endsOf is a reduction that knows a sequence and its nominal geometry.
func endsOf(seq *sequence.Sequence) *reduction {
	r := &reduction{seq: seq, camera: &exposure.Camera{Columns: testColumns, Rows: testRows}}
	r.optics.geometry = nominalGeometry(seq)
	return r
}

// The edges of mirrors 0 and 15 lie half a mirror beyond their middles, worked by hand:
// 11.7 + 1.02 (-0.5 - 7.5) = 3.54 and 11.7 + 1.02 (15.5 - 7.5) = 19.86.
func TestEndsOfASquareDevice(t *testing.T) {
	r := endsOf(smallSequence(t, instrument.Square, nil))
	ends, same := r.commonEnds()
	require.True(t, same)
	require.Len(t, ends, 2)
	require.InDelta(t, 3.54, ends[0].Row, 1e-12)
	require.True(t, ends[0].Above)
	require.InDelta(t, 19.86, ends[1].Row, 1e-12)
	require.False(t, ends[1].Above)

	// The trace's excursion over 40 columns, 19.5 px to either side at 0.0045, is left
	// out of the lit rows.
	first, last := r.litRows(4)
	require.Equal(t, []int{4, 19}, []int{first, last})
}

// A range closed for all adds two ends to every element; one closed for an element
// alone makes its ends its own.
func TestEndsOfClosedRows(t *testing.T) {
	one := 3
	for _, c := range []struct {
		closed []sequence.ClosedRow
		ends   int
		same   bool
	}{
		{[]sequence.ClosedRow{{First: 0, Last: 1}}, 2, true},
		{[]sequence.ClosedRow{{First: 6, Last: 7}}, 4, true},
		{[]sequence.ClosedRow{{First: 6, Last: 7, Element: &one}}, 2, false},
	} {
		r := endsOf(smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) { target.Closed = c.closed }))
		require.Len(t, r.ends(0), c.ends)
		_, same := r.commonEnds()
		require.Equal(t, c.same, same)
		if !same {
			require.Len(t, r.ends(one), c.ends+2)
		}
	}
	// The strips of a turned device end at different rows.
	_, same := endsOf(smallSequence(t, instrument.Diagonal, nil)).commonEnds()
	require.False(t, same)
}

// lit is the light of evenly shining rows of mirrors, spread by a Gaussian: the middle
// is 1, far outside is 0, and everywhere it is the difference of two error functions
// at the slit's ends over that of an endless slit, from which the single mirrors' steps
// of 1.02 px depart by less than 1e-3.
func TestLit(t *testing.T) {
	r := endsOf(smallSequence(t, instrument.Square, nil))
	lit := r.lit()
	n := r.seq.N()
	sigma := r.seq.Profile.Spectrograph.LSFFWHMPx / (2 * math.Sqrt(2*math.Ln2))
	for y := range testRows {
		want := (math.Erf((float64(y)-3.54)/(sigma*math.Sqrt2)) - math.Erf((float64(y)-19.86)/(sigma*math.Sqrt2))) / 2
		for j := range n {
			require.InDelta(t, want, lit[y*n+j], 0.02, "row %d", y)
		}
	}
	require.InDelta(t, 1, lit[12*n], 1e-3)
}

// The flags of closed rows keep their light out.
func TestLitOfAClosedElement(t *testing.T) {
	one := 3
	r := endsOf(smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) {
		target.Closed = []sequence.ClosedRow{{First: 0, Last: 15, Element: &one}}
	}))
	lit, n := r.lit(), r.seq.N()
	require.Zero(t, lit[12*n+one])
	require.Greater(t, lit[12*n+one+1], float32(0.99))
	require.Empty(t, r.ends(one))
	require.IsType(t, []calib.RowEnd{}, r.ends(0))
}
