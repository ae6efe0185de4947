package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// framesOf makes a frame for every step that keep chooses, none of them on disk.
func framesOf(seq *sequence.Sequence, keep func(sequence.Step) bool) (list []*exposure.Frame) {
	for i, st := range seq.Steps {
		if keep(st) && (st.Kind != sequence.Flat || isLampOn(seq, i)) {
			list = append(list, &exposure.Frame{Step: i, Entry: i})
		}
	}
	return list
}

func flatsAndCycles(target *sequence.Target, _ *instrument.Profile) {
	target.Code.Cycles = 2
	target.Calibration.Flat = sequence.FlatFrames{Count: 2, DwellSeconds: 5, Lamp: "halogen", CodedCycles: 1}
}

// A whole night: every slot has a frame a cycle, calibrations are sorted by kind,
// lamp frames by what the mirrors show.
func TestAssignWhole(t *testing.T) {
	seq := smallSequence(t, instrument.Square, flatsAndCycles)
	all := func(sequence.Step) bool { return true }
	r, err := assign(seq, framesOf(seq, all), true, nil)
	require.NoError(t, err)
	for row, frames := range r.slots {
		require.Len(t, frames, 2, "slot %d", row)
		for _, f := range frames {
			require.Equal(t, row, seq.Steps[f.Step].Row)
		}
	}
	c := r.calibration
	require.Len(t, c.bias, 20)
	require.Len(t, c.dark, 5)
	require.Len(t, c.off, 3)
	require.Len(t, c.lamps.on, 2)
	require.Equal(t, []float64{90, 90, 90}, []float64{c.scienceSeconds, c.darkSeconds, c.offSeconds})
	require.Equal(t, 30, r.science)
	require.Empty(t, r.lost)
	require.Empty(t, r.degraded)
	require.Empty(t, r.warnings)
	scale := newSlotScale(r.slots, nil)
	require.Empty(t, scale.lost)
	require.Equal(t, 0.5, scale.quiet[3])
	require.InDelta(t, 7.5, scale.quietSum, 1e-12)
}

// What is missing is said once, and graver where a whole kind is gone or a code row
// has no frame at all.
func TestAssignMissing(t *testing.T) {
	seq := smallSequence(t, instrument.Square, flatsAndCycles)
	science := seq.StepsOf(sequence.Science)
	gone := seq.Steps[science[4]].Row
	var repeat []int
	for _, i := range science {
		if seq.Steps[i].Row == gone {
			repeat = append(repeat, seq.Steps[i].Step)
		}
	}
	single := seq.Steps[science[0]]
	r, err := assign(seq, framesOf(seq, func(st sequence.Step) bool {
		return st.Kind != sequence.Dark && st.Kind != sequence.Flat && st.Row != gone && st.Step != single.Step && st.Step != 1
	}), true, nil)
	require.NoError(t, err)
	require.Equal(t, []int{gone}, r.lost)
	require.Equal(t, repeat, r.missing)
	require.Len(t, r.degraded, 2)
	require.Contains(t, r.degraded[0], "all 5 dark frames are missing")
	require.Contains(t, r.degraded[1], "dead pixels are not known")
	require.Equal(t, []string{"1 of 20 bias frames are missing"}, r.warnings)
	scale := newSlotScale(r.slots, nil)
	require.Equal(t, []int{gone}, scale.lost)
	require.True(t, scale.isLost(gone))
	require.Equal(t, 1.0, scale.quiet[single.Row])
	// Who asks for no calibration misses none.
	r, err = assign(seq, framesOf(seq, func(st sequence.Step) bool { return st.Kind == sequence.Science }), false, nil)
	require.NoError(t, err)
	require.Empty(t, r.degraded)
}

// Darks of different exposure times cannot be averaged.
func TestAssignRefusesMixedExposures(t *testing.T) {
	seq := smallSequence(t, instrument.Square, nil)
	seq.Steps[seq.StepsOf(sequence.Dark)[2]].ExptimeSeconds = 45
	_, err := assign(seq, framesOf(seq, func(sequence.Step) bool { return true }), true, nil)
	require.ErrorContains(t, err, "dark steps of 90 s and of 45 s")
}
