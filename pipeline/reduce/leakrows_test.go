package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
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

// What lies beyond the field, found by going through all mirrors of a row; and a trace
// that leads to other mirror rows at other columns.
func TestBeyondField(t *testing.T) {
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		seq := smallSequence(t, mounting, nil)
		p, columns := seq.Profile, seq.ElementColumns()
		first, last := seq.Elements[columns[0]].First, seq.Elements[columns[len(columns)-1]].Last
		counts := map[int][3]float64{} // of w: before, in, after
		for column := range p.DMD.Columns {
			for row := range p.DMD.Rows {
				u, w := column, row
				if mounting == instrument.Diagonal {
					u, w = column+row, row-column
				}
				c := counts[w]
				switch {
				case u < first:
					c[0]++
				case u > last:
					c[2]++
				default:
					c[1]++
				}
				counts[w] = c
			}
		}
		b := newBeyondField(seq)
		wFirst, wLast := p.WRange()
		middle := (wFirst + wLast) / 2
		mean := func(i int) float64 {
			return (counts[middle-1][i] + 2*counts[middle][i] + counts[middle+1][i]) / 4
		}
		perElement := mean(1) / float64(seq.N())
		require.InDelta(t, mean(0)/perElement, b.before[middle-wFirst], 1e-9)
		require.InDelta(t, mean(2)/perElement, b.after[middle-wFirst], 1e-9)

		g := calib.Geometry{TraceTilt: 0.5}
		before, after := make([]float64, 9), make([]float64, 9)
		b.row(before, after, p, &g, 12)
		for x := range before {
			i := min(max(mirrorRow(p, 12-0.5*float64(x))-wFirst, 0), wLast-wFirst)
			require.Equal(t, [2]float64{b.before[i], b.after[i]}, [2]float64{before[x], after[x]})
		}
	}
}

// Rows near closed mirrors and near the device's ends are left out, rows far from any
// mirror are not. 11 elements of two columns of 24 leave one element's width beyond.
func TestLeakRows(t *testing.T) {
	seq := smallSequence(t, instrument.Square, nil)
	rows := endsOf(seq).leakRows()
	used, lit := 0, 0
	for y, r := range rows {
		if r.use {
			used++
		}
		if r.lit {
			lit++
			require.True(t, r.use && y >= 7 && y <= 16, "row %d", y)
		}
	}
	require.Positive(t, lit)
	require.GreaterOrEqual(t, used, lit)
	for i, before := range newBeyondField(seq).before {
		require.InDelta(t, 1, before+newBeyondField(seq).after[i], 1e-12)
	}

	closed := endsOf(smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) {
		target.Closed = []sequence.ClosedRow{{First: 8, Last: 15}}
	})).leakRows()
	for y := 9; y < 23; y++ {
		require.False(t, closed[y].use, "row %d", y)
	}
}
