package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Only frames of the cycles asked for count, and only their rows can be lost.
func TestCycles(t *testing.T) {
	seq := smallSequence(t, instrument.Square, func(target *sequence.Target, _ *instrument.Profile) { target.Code.Cycles = 3 })
	require.NoError(t, checkCycles(seq, nil))
	require.NoError(t, checkCycles(seq, []int{3, 1}))
	require.ErrorContains(t, checkCycles(seq, []int{4}), "no cycle 4 of science steps among the sequence's 1 to 3; name others with --cycles")
	require.ErrorContains(t, checkCycles(seq, []int{0}), "no cycle 0")

	cycles := []int{1, 3}
	l := make(product.Ledger, len(seq.Steps))
	for i := range l {
		l[i] = product.NewEntry(i + 1)
		l[i].Verdict = product.OK
	}
	noteCycles(l, seq, cycles)
	noted := 0
	for i, e := range l {
		step := seq.Steps[i]
		require.Equal(t, step.Kind == sequence.Science && step.Cycle == 2, e.Note != "", "step %d", i+1)
		if e.Note != "" {
			noted++
		}
	}
	require.Equal(t, seq.V, noted)

	const gone = 5
	r, err := assign(seq, framesOf(seq, func(st sequence.Step) bool {
		return st.Kind == sequence.Science && usesCycle(cycles, st) && st.Row != gone
	}), false, cycles)
	require.NoError(t, err)
	require.Equal(t, 2*(seq.V-1), r.science)
	require.Len(t, r.missing, 2)
	for _, step := range r.missing {
		require.NotEqual(t, 2, seq.Steps[step-1].Cycle)
	}
}
