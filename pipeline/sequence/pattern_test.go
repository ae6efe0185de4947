package sequence_test

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// The small sequence's lamp frames: one of each mask, a coded cycle, arcs of
// elements 0, 5, 10, 15, 20 and the last, 23.
func TestPattern(t *testing.T) {
	target, profile := small(t, instrument.Square)
	s := build(t, target, profile)
	counts := map[sequence.Kind]map[sequence.Pattern]int{}
	var singles []int
	for i, st := range s.Steps {
		p, number := s.Pattern(i)
		if counts[st.Kind] == nil {
			counts[st.Kind] = map[sequence.Pattern]int{}
		}
		counts[st.Kind][p]++
		switch p {
		case sequence.PatternRow:
			require.Equal(t, st.Row, number)
		case sequence.PatternSingle:
			singles = append(singles, number)
		default:
			require.Equal(t, -1, number)
		}
	}
	require.Equal(t, map[sequence.Kind]map[sequence.Pattern]int{
		sequence.Bias:    {sequence.PatternOff: 2},
		sequence.Dark:    {sequence.PatternOff: 1},
		sequence.Flat:    {sequence.PatternOn: 1, sequence.PatternEven: 1, sequence.PatternOdd: 1, sequence.PatternOff: 1, sequence.PatternRow: 31},
		sequence.Arc:     {sequence.PatternSingle: 6},
		sequence.AllOff:  {sequence.PatternOff: 8},
		sequence.Science: {sequence.PatternRow: 62},
	}, counts)
	require.Equal(t, []int{0, 5, 10, 15, 20, 23}, singles)
}

func TestPatternOfFewElements(t *testing.T) {
	for _, c := range []struct {
		n    int
		kind sequence.Kind
		bits []uint8
		want sequence.Pattern
		at   int
	}{
		{1, sequence.Arc, []uint8{1}, sequence.PatternSingle, 0},
		{1, sequence.Flat, []uint8{1}, sequence.PatternEven, -1},
		{2, sequence.Arc, []uint8{0, 1}, sequence.PatternSingle, 1},
		{2, sequence.Flat, []uint8{0, 1}, sequence.PatternOdd, -1},
		{3, sequence.Flat, []uint8{0, 1, 0}, sequence.PatternOdd, -1},
		{3, sequence.Arc, []uint8{0, 1, 0}, sequence.PatternSingle, 1},
		{3, sequence.Flat, []uint8{1, 0, 0}, sequence.PatternSingle, 0},
		{3, sequence.Flat, []uint8{1, 1, 0}, sequence.PatternOther, -1},
		{4, sequence.Flat, []uint8{0, 1, 0, 0}, sequence.PatternSingle, 1},
	} {
		s := &sequence.Sequence{Steps: []sequence.Step{{Kind: c.kind, Row: -1}}, Code: [][]uint8{c.bits}}
		for j := range c.n {
			s.Elements = append(s.Elements, sequence.Element{Column: j, Element: j, First: j, Last: j})
		}
		p, at := s.Pattern(0)
		require.Equal(t, c.want, p, c)
		require.Equal(t, c.at, at, c)
	}
}
