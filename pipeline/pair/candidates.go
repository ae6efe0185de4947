package pair

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// group is the frames without STEP that fit the same steps.
type group struct {
	steps  []int // indices, ascending
	frames []*label
}

// byCandidates gives steps to the frames without a STEP card.
func (m *matcher) byCandidates() {
	groups := m.groups()
	claimed := make([]int, len(m.seq.Steps))
	for _, g := range groups {
		for _, i := range g.steps {
			claimed[i]++
		}
	}
	for _, g := range groups {
		if slices.ContainsFunc(g.steps, func(i int) bool { return claimed[i] > 1 }) {
			for _, l := range g.frames {
				l.refuse(product.Extra, "without %s it cannot be told from frames with other cards which step it serves", m.seq.Profile.Keywords.Step)
			}
			continue
		}
		m.deal(g)
	}
}

// groups sorts the undecided frames by the steps they fit; frames that fit none
// are refused.
func (m *matcher) groups() []*group {
	var groups []*group
	byKey := map[string]*group{}
	for _, l := range m.labels {
		if l.verdict != "" {
			continue
		}
		steps := m.candidates(l)
		if l.verdict != "" {
			continue
		}
		key := fmt.Sprint(steps)
		if byKey[key] == nil {
			byKey[key] = &group{steps: steps}
			groups = append(groups, byKey[key])
		}
		byKey[key].frames = append(byKey[key].frames, l)
	}
	return groups
}

// candidates gives the free steps that a frame fits. If there are none it decides
// the frame's verdict.
func (m *matcher) candidates(l *label) []int {
	k := m.seq.Profile.Keywords
	switch {
	case !m.rightSize(l):
		l.refuse(product.WrongSize, "%s", m.sizeNote(l))
		return nil
	case l.kindWord != "" && l.kind == "":
		l.refuse(product.Extra, "%s %q is none of the profile's kinds", k.Kind, l.kindWord)
		return nil
	case l.maskID == "" && l.kind == "":
		l.refuse(product.Extra, "it has neither %s nor %s nor %s", k.Step, k.MaskID, k.Kind)
		return nil
	}
	var alike, exposed, free []int
	for i, st := range m.seq.Steps {
		if !fits(l, st) {
			continue
		}
		alike = append(alike, i)
		if math.IsNaN(l.exptime) || sameExposure(l.exptime, st.ExptimeSeconds) {
			exposed = append(exposed, i)
			if m.free(i) {
				free = append(free, i)
			}
		}
	}
	switch {
	case len(alike) == 0:
		l.refuse(product.Extra, "no step has %s", l.claims(k.MaskID, k.Kind))
	case len(exposed) == 0:
		l.refuse(product.WrongExposure, "%s is %g s; step %d with its mask and kind asks for %g s", k.Exptime, l.exptime, m.seq.Steps[alike[0]].Step, m.seq.Steps[alike[0]].ExptimeSeconds)
	case len(free) == 0:
		l.refuse(product.Duplicate, "every step that it fits has a frame with %s", k.Step)
	}
	return free
}

// fits compares mask and kind as far as the frame gives them.
func fits(l *label, st sequence.Step) bool {
	return (l.maskID == "" || l.maskID == st.MaskID) && (l.kind == "" || l.kind == st.Kind)
}

// claims says what a frame gives of mask and kind.
func (l *label) claims(maskKey, kindKey string) string {
	switch {
	case l.kind == "":
		return fmt.Sprintf("%s %s", maskKey, l.maskID)
	case l.maskID == "":
		return fmt.Sprintf("%s %q", kindKey, l.kindWord)
	}
	return fmt.Sprintf("%s %s with %s %q", maskKey, l.maskID, kindKey, l.kindWord)
}

// deal gives the steps of a group to its frames in the order of time.
func (m *matcher) deal(g *group) {
	frames := slices.Clone(g.frames)
	slices.SortStableFunc(frames, func(a, b *label) int {
		return cmp.Or(a.start.Compare(b.start), cmp.Compare(a.name, b.name))
	})
	if m.provisional == nil && m.oneOff(g, frames) {
		m.deferred(g, frames)
		return
	}
	if !m.exchangeable(g.steps) && (len(frames) != len(g.steps) || !ordered(frames)) {
		for _, l := range frames {
			l.refuse(product.Extra, "%s", m.undecided(g, frames))
		}
		return
	}
	if spare := len(frames) - len(g.steps); spare > 0 {
		for _, l := range frames[:spare] {
			l.refuse(product.Duplicate, "%d frames for %d steps alike; the ones taken last are kept", len(frames), len(g.steps))
		}
		frames = frames[spare:]
	}
	for n, l := range frames {
		l.at, l.by = g.steps[n], product.ByMaskID
		if l.maskID == "" {
			l.by = product.ByTime
		}
		if len(g.steps) > 1 {
			l.note("number %d of %d frames for %d steps, in the order of %s", n+1, len(frames), len(g.steps), m.order(frames))
		}
		l.verdict = m.judge(l)
		m.release(l.at)
		m.holders[l.at] = l
	}
}

// exchangeable tells whether steps ask for the same: then it does not matter to
// the decoding which of their frames is which.
func (m *matcher) exchangeable(steps []int) bool {
	first := m.seq.Steps[steps[0]]
	return !slices.ContainsFunc(steps, func(i int) bool {
		st := m.seq.Steps[i]
		return st.MaskID != first.MaskID || st.Kind != first.Kind || st.Lamp != first.Lamp || st.ExptimeSeconds != first.ExptimeSeconds
	})
}

// ordered tells whether frames sorted by time have times that all differ.
func ordered(frames []*label) bool {
	for n, l := range frames {
		if l.start.IsZero() || n > 0 && l.start.Equal(frames[n-1].start) {
			return false
		}
	}
	return true
}

func (m *matcher) order(frames []*label) string {
	if ordered(frames) {
		return m.seq.Profile.Keywords.DateObs
	}
	return m.seq.Profile.Keywords.DateObs + " and file name"
}

// undecided says why a group's frames cannot be told apart.
func (m *matcher) undecided(g *group, frames []*label) string {
	k := m.seq.Profile.Keywords
	why := fmt.Sprintf("%s is missing or the same in several frames", k.DateObs)
	if len(frames) != len(g.steps) {
		why = fmt.Sprintf("there are %d frames for %d different steps", len(frames), len(g.steps))
	}
	return fmt.Sprintf("which step it serves cannot be told: it has no %s, and %s; write %s or %s into the headers", k.Step, why, k.Step, k.MaskID)
}

// release takes a step from a frame that held it for worse.
func (m *matcher) release(i int) {
	if old := m.holders[i]; old != nil {
		old.note("of step %d, for which there is a better frame", m.seq.Steps[i].Step)
		m.holders[i] = nil
	}
}
