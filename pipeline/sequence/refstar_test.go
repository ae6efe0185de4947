package sequence_test

import (
	"context"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

const starKeys = `  refstar: {name: reference one, count: 3, dwell_s: 12, ra_deg: 12.5, dec_deg: 4, elements: [6, 17]}
`

// A planned sequence with a reference star reads back with its steps, each a run of open
// elements and no dark column.
func TestRefStarSteps(t *testing.T) {
	for _, mounting := range []string{instrument.Square, instrument.Diagonal} {
		_, profile := small(t, mounting)
		text := smallTarget + starKeys
		if mounting == instrument.Square {
			text = strings.Replace(text, "first: -6, last: -5", "first: 20, last: 22", 1)
		}
		target, err := sequence.ParseTarget("small.yaml", []byte(text))
		require.NoError(t, err)
		dir := write(t, build(t, target, profile))
		s, err := sequence.Read(context.Background(), dir)
		require.NoError(t, err)
		require.Equal(t, *target.Calibration.RefStar, *s.Target.Calibration.RefStar)
		steps := s.StepsOf(sequence.RefStar)
		require.Len(t, steps, 3)
		require.Equal(t, len(s.Steps)-3, steps[0], "behind all others")
		for _, i := range steps {
			st := s.Steps[i]
			require.Equal(t, 12.0, st.ExptimeSeconds)
			require.Equal(t, [2]int{-1, 0}, [2]int{st.Row, st.Cycle})
			pattern, first := s.Pattern(i)
			require.Equal(t, sequence.PatternWide, pattern)
			require.Equal(t, 6, first)
			first, last, ok := s.WideElement(i)
			require.Equal(t, [2]int{6, 17}, [2]int{first, last})
			require.True(t, ok)
			for j, column := range s.ElementColumns() {
				require.Equal(t, j >= 6 && j <= 17, s.Code[i][column] == 1)
			}
			for _, column := range s.DarkColumns() {
				require.Zero(t, s.Code[i][column])
			}
		}
	}
}

func TestRefStarRefusals(t *testing.T) {
	for _, c := range []struct{ old, replacement, want string }{
		{"count: 3", "count: 0", "calibration.refstar.count: 0 is outside 1 to 10000"},
		{"dwell_s: 12", "dwell_s: 0", "calibration.refstar.dwell_s: 0 is not above 0"},
		{"ra_deg: 12.5", "ra_deg: 361", "calibration.refstar.ra_deg: 361 is outside 0 to below 360; give degrees"},
		{"dec_deg: 4", "dec_deg: 94", "calibration.refstar.dec_deg: 94 is outside -90 to 90"},
		{"[6, 17]", "[17, 6]", "calibration.refstar.elements: 6 lies before 17; exchange them"},
		{"[6, 17]", "[-1, 6]", "calibration.refstar.elements[0]: -1 is outside"},
		{"[6, 17]", "[6]", "calibration.refstar.elements: the list has 1 items where 2 are wanted"},
		{"name: reference one, ", "", "calibration.refstar.name: the key is missing"},
		{"name: reference one", `name: ""`, `calibration.refstar.name: "" is no name`},
	} {
		require.Contains(t, starKeys, c.old)
		_, err := sequence.ParseTarget("small.yaml", []byte(smallTarget+strings.Replace(starKeys, c.old, c.replacement, 1)))
		require.ErrorContains(t, err, "small.yaml:21: "+c.want)
		require.ErrorContains(t, err, "; ")
	}
}

// What STEPS and CODE say of a refstar step must be what the target asks for.
func TestRefStarContradictions(t *testing.T) {
	_, profile := small(t, instrument.Diagonal)
	target, err := sequence.ParseTarget("small.yaml", []byte(smallTarget+starKeys))
	require.NoError(t, err)
	whole := build(t, target, profile)
	at := whole.StepsOf(sequence.RefStar)[1]
	columns := whole.ElementColumns()
	flip := func(s *sequence.Sequence, column int) {
		s.Code[at] = append([]uint8{}, s.Code[at]...)
		s.Code[at][column] ^= 1
	}
	for name, c := range map[string]struct {
		edit func(s *sequence.Sequence)
		want string
	}{
		"one more":        {func(s *sequence.Sequence) { flip(s, columns[18]) }, "does not open the elements 6 to 17, as calibration.refstar of target.yaml says"},
		"a gap":           {func(s *sequence.Sequence) { flip(s, columns[9]) }, "does not open the elements 6 to 17"},
		"a dark column":   {func(s *sequence.Sequence) { flip(s, s.DarkColumns()[0]) }, "opens the dark column"},
		"a code row":      {func(s *sequence.Sequence) { s.Steps[at].Row, s.Steps[at].Cycle = 3, 1 }, "of kind refstar and has the code ROW 3, not -1"},
		"a lamp":          {func(s *sequence.Sequence) { s.Steps[at].Lamp = "NeAr" }, "is no lamp frame and has LAMP"},
		"nothing planned": {func(s *sequence.Sequence) { c := *s.Target; c.Calibration.RefStar = nil; s.Target = &c }, "is of kind refstar where target.yaml has no calibration.refstar"},
	} {
		s := clone(whole)
		c.edit(s)
		require.ErrorContains(t, s.Write(context.Background(), t.TempDir()+"/sequence"), c.want, name)
	}
}
