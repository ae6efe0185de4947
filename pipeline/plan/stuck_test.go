package plan_test

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// What becomes of stuck mirrors: the figures are worked out by hand. A mirror of the
// demo's elements of two is 0.51 of a pixel row's light, spread over rows by a Gaussian of
// 1.36: h(d)/1.96 is above 1 % up to 3 rows from its centre. 111 elements times 163 rows
// are lit. Four neighbours along w, both mirrors of an element, leave less than half.
func TestStuckWarnings(t *testing.T) {
	warnings := func(everyOff int, list ...instrument.StuckMirror) []string {
		target, profile := demo(t)
		target.AllOffEvery = everyOff
		require.NoError(t, profile.SetStuck("stuck.csv", list))
		_, summary := build(t, target, profile)
		var said []string
		for _, w := range summary.Warnings {
			if strings.HasPrefix(w, "mirrors ") {
				said = append(said, w)
			}
		}
		return said
	}
	one := instrument.StuckMirror{Column: 100, Row: 80}
	outside := instrument.StuckMirror{Column: 3, Row: 10}
	require.Empty(t, warnings(16))
	require.Equal(t, []string{
		"mirrors that do not move: 2, in the coded field 1, by which 7 of 18093 pairs of an element and a detector row lack more than 1 % of their light, which reduce puts in from what is around; off where no step opens them: 1",
	}, warnings(16, one, outside))
	outside.On = true
	require.Equal(t, []string{
		"mirrors that do not move: 1, in the coded field 0",
		"mirrors stuck on: 1, and no all-off frame is planned, which would show their light: give all_off_every",
	}, warnings(0, outside))
	var many []instrument.StuckMirror
	for row := 60; row < 64; row++ {
		many = append(many, instrument.StuckMirror{Column: 101, Row: row}, instrument.StuckMirror{Column: 102, Row: row})
	}
	said := warnings(16, many...)
	require.Len(t, said, 1)
	require.Regexp(t, `lack more than 1 % .*, and 4 more than half, whose voxels will be flagged LOWFLAT`, said[0])
}
