package reduce

import (
	"fmt"
	"slices"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// checkCycles refuses cycles that the sequence does not have.
func checkCycles(seq *sequence.Sequence, cycles []int) error {
	last := 0
	for _, i := range seq.StepsOf(sequence.Science) {
		last = max(last, seq.Steps[i].Cycle)
	}
	for _, c := range cycles {
		if c < 1 || c > last {
			return fmt.Errorf("there is no cycle %d of science steps among the sequence's 1 to %d; name others with --cycles", c, last)
		}
	}
	return nil
}

// usesCycle tells whether a science step's cycle was asked for; no cycles ask for all.
func usesCycle(cycles []int, step sequence.Step) bool {
	return len(cycles) == 0 || slices.Contains(cycles, step.Cycle)
}

// noteCycles says of frames of other cycles that they were left out.
func noteCycles(l product.Ledger, seq *sequence.Sequence, cycles []int) {
	for _, i := range seq.StepsOf(sequence.Science) {
		if e := &l[i]; e.Verdict.Used() && !usesCycle(cycles, seq.Steps[i]) {
			if e.Note != "" {
				e.Note += "; "
			}
			e.Note += "not used: its cycle was not asked for"
		}
	}
}
