package sequence_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// Stuck mirrors are placed as the masks have them: a step that opens an element opens its
// mirrors (the design's section 3), and no step opens a closed or a sentinel one by the
// code.
func TestStuckMirrorsArePlaced(t *testing.T) {
	for _, name := range []string{"optical", "infrared"} {
		p, err := instrument.Load(name)
		require.NoError(t, err)
		target, err := sequence.LoadTarget(map[string]string{"optical": "demo", "infrared": "demo-infrared"}[name])
		require.NoError(t, err)
		first, last := p.WRange()
		middle := (first + last) / 2
		target.SentinelRows = []sequence.SentinelRow{{First: middle + 4, Last: middle + 9, Element: 5}}
		one := 3
		target.Closed = append(target.Closed, sequence.ClosedRow{First: middle - 9, Last: middle - 4, Element: &one}, sequence.ClosedRow{First: middle + 20, Last: middle + 25})
		var all []instrument.StuckMirror
		for row := 0; row < p.DMD.Rows; row += 3 {
			for column := 0; column < p.DMD.Columns; column += 3 {
				all = append(all, instrument.StuckMirror{Column: column, Row: row, On: row%2 == 0})
			}
		}
		require.NoError(t, p.SetStuck("stuck.csv", all))
		seq, _, err := plan.Build(context.Background(), target, p)
		require.NoError(t, err)
		columns := seq.ElementColumns()
		steps := seq.StepsOf(sequence.Science)[:12]
		placed := seq.StuckMirrors()
		require.Len(t, placed, len(all))
		uses := map[string]int{}
		for _, k := range steps {
			mask := seq.Mask(k)
			for _, m := range placed {
				on := mask.On[m.Row*p.DMD.Columns+m.Column] == 1
				switch {
				case m.Coded():
					require.Equal(t, seq.Code[k][columns[m.Element]] == 1, on, m)
				case m.Use == sequence.UseSentinel:
					require.Equal(t, m.Element == 5, on, m)
				default:
					require.False(t, on, m)
				}
				uses[m.Use]++
			}
		}
		for _, use := range []string{sequence.UseCoded, sequence.UseClosed, sequence.UseSentinel, ""} {
			require.Positive(t, uses[use], "%s: %q", name, use)
		}
	}
}
