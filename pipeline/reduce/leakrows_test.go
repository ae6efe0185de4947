package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// The range of u of every mirror row, found by going through all mirrors.
func TestURangeOfARow(t *testing.T) {
	p := smallSequence(t, instrument.Diagonal, nil).Profile
	found := map[int][2]int{}
	for column := range p.DMD.Columns {
		for row := range p.DMD.Rows {
			u, w := column+row, row-column
			r, seen := found[w]
			if !seen {
				r = [2]int{u, u}
			}
			found[w] = [2]int{min(r[0], u), max(r[1], u)}
		}
	}
	require.Len(t, found, p.DMD.Columns+p.DMD.Rows-1)
	for w, want := range found {
		first, last := uRangeOf(p, w)
		require.Equal(t, want, [2]int{first, last}, "w = %d", w)
	}
}

// Rows near closed mirrors and near the device's ends are left out, rows far from any
// mirror are not. 11 elements of two columns of 24 leave one element's width beyond.
func TestLeakRows(t *testing.T) {
	rows := endsOf(smallSequence(t, instrument.Square, nil)).leakRows()
	used, lit := 0, 0
	for y, r := range rows {
		if r.use {
			used++
			if r.before+r.after > 0 {
				lit++
				require.InDelta(t, 1, r.before+r.after, 1e-12)
				require.True(t, y >= 7 && y <= 16, "row %d", y)
			}
		}
	}
	require.Positive(t, lit)
	require.GreaterOrEqual(t, used, lit)

	closed := endsOf(smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) {
		target.Closed = []sequence.ClosedRow{{First: 8, Last: 15}}
	})).leakRows()
	for y := 9; y < 23; y++ {
		require.False(t, closed[y].use, "row %d", y)
	}
}
