package report

import (
	"slices"

	"mirrorloom/pipeline/product"
)

// Trust is the answer to whether a product can be trusted.
type Trust string

// The answers.
const (
	TrustYes  Trust = "yes"
	TrustLook Trust = "look" // at some places or figures first
	TrustNo   Trust = "no"
)

// Verdict is the answer in words, for people who read no further.
type Verdict struct {
	Trust    Trust
	Headline string
	Reasons  []string // one to three short sentences
	Do       []string // what to do, one or two sentences
	Checks   []Check  // all that was looked at, in an order of its own
}

// Check is one thing that was looked at.
type Check struct {
	Name   string // of what
	Figure string // what was found, in a few words
	Level  Trust
	Says   string // it in a sentence
	Do     string // what to do where it is not well; empty if nothing
	// notable: something happened and was dealt with.
	notable bool
}

// most reasons and things to do: what is read at a glance.
const (
	mostReasons = 3
	mostDo      = 2
)

// Judge weighs a run by its figures and its ledger; neither text nor the cube are looked at.
func Judge(run *product.Run, ledger product.Ledger) Verdict {
	v := Verdict{Trust: TrustYes, Checks: checksOf(run, ledger)}
	for _, c := range v.Checks {
		if worse(c.Level, v.Trust) {
			v.Trust = c.Level
		}
	}
	switch v.Trust {
	case TrustYes:
		v.Headline = "Yes, it can be trusted."
	case TrustLook:
		v.Headline = "Look at these places first."
	case TrustNo:
		v.Headline = "No, do not trust it."
	}
	sorted := slices.Clone(v.Checks)
	slices.SortStableFunc(sorted, func(a, b Check) int { return b.rank() - a.rank() })
	for _, c := range sorted {
		// Where something is wrong, what is better belongs to the table.
		if c.Says == "" || c.Level != v.Trust || len(v.Reasons) == mostReasons {
			continue
		}
		v.Reasons = append(v.Reasons, c.Says)
		if c.Do != "" && len(v.Do) < mostDo && !slices.Contains(v.Do, c.Do) {
			v.Do = append(v.Do, c.Do)
		}
	}
	if v.Trust == TrustYes {
		v.Do = []string{"Use it as it is, without the voxels that are flagged. For sums over voxels take the command extract: errors of neighbours are not independent."}
	}
	return v
}

func rank(t Trust) int {
	switch t {
	case TrustNo:
		return 2
	case TrustLook:
		return 1
	}
	return 0
}

// rank puts what is worst first, and what happened before what did not.
func (c Check) rank() int {
	if c.notable {
		return 2*rank(c.Level) + 1
	}
	return 2 * rank(c.Level)
}

func worse(a, b Trust) bool { return rank(a) > rank(b) }
