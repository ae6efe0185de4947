package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Lamp frames are sorted by what the mirrors show, whatever order they come in; rows
// of the code without a frame are lost; frames of two exposure times are refused.
func TestLampFrames(t *testing.T) {
	seq := smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) {
		target.Calibration.Flat = sequence.FlatFrames{Count: 2, DwellSeconds: 5, Lamp: "halogen", CodedCycles: 1}
		target.Calibration.Arc = sequence.ArcFrames{Count: 1, DwellSeconds: 8, Lamp: "Ne", Every: 4}
	})
	flats := seq.StepsOf(sequence.Flat)
	require.Len(t, flats, 4*2+15)
	var l lamps
	for k := range flats {
		require.NoError(t, l.add(seq, &exposure.Frame{Step: flats[len(flats)-1-k]}))
	}
	for _, list := range [][]*exposure.Frame{l.on, l.even, l.odd, l.off} {
		require.Len(t, list, 2)
	}
	require.Len(t, l.coded, 15)
	for row, list := range l.coded {
		require.Len(t, list, 1)
		require.Equal(t, row, seq.Steps[list[0].Step].Row)
	}
	require.Empty(t, l.lost())
	require.Len(t, l.all(), len(flats))
	require.Equal(t, 5.0, l.seconds)
	for _, f := range l.even { // the design's all-even has 1 at even j
		for j, column := range seq.ElementColumns() {
			require.Equal(t, uint8(1-j%2), seq.Code[f.Step][column])
		}
	}

	l.coded[3], l.coded[7] = nil, nil
	require.Equal(t, []int{3, 7}, l.lost())
	require.Len(t, l.all(), len(flats)-2)
	require.Empty(t, new(lamps).lost(), "no cycle, no loss")

	// A single element's frame is none of the flats'.
	before := len(l.all())
	arc := seq.StepsOf(sequence.Arc)[1]
	seq.Steps[arc].ExptimeSeconds = 5
	require.NoError(t, l.add(seq, &exposure.Frame{Step: arc}))
	require.Len(t, l.all(), before)

	seq.Steps[flats[0]].ExptimeSeconds = 7
	require.ErrorContains(t, l.add(seq, &exposure.Frame{Step: flats[0]}), "flat steps of 5 s and of 7 s")
}
