package pair

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Exposures agree within 10 ms or one part in a thousand, whichever is more:
// headers often quote the measured time, which a shutter misses by some
// milliseconds (common practice, no source), while a wrong dwell is off by far
// more. What remains acts as a throughput of less than 0.1 %.
const (
	exposureSlackSeconds  = 0.010
	exposureSlackFraction = 1e-3
)

// matcher pairs the labels of a night with the steps of a sequence.
type matcher struct {
	dir    string
	seq    *sequence.Sequence
	labels []*label
	// holders has for each step the frame that is shown in its row, or nil.
	holders []*label
	// audits: the audit will look at the pairing, and may be left a question.
	audits      bool
	provisional *provisional
}

func newMatcher(dir string, seq *sequence.Sequence, labels []*label) *matcher {
	return &matcher{dir: dir, seq: seq, labels: labels, holders: make([]*label, len(seq.Steps))}
}

// byKeyword gives steps to the frames with a STEP card.
func (m *matcher) byKeyword() {
	claims := make([][]*label, len(m.seq.Steps))
	for _, l := range m.labels {
		if l.verdict != "" || !l.hasStep {
			continue
		}
		if l.step < 1 || l.step > len(m.seq.Steps) {
			l.refuse(product.Extra, "%s %d is not among the sequence's steps, 1 to %d", m.seq.Profile.Keywords.Step, l.step, len(m.seq.Steps))
			continue
		}
		l.at, l.by = l.step-1, product.ByKeyword
		l.verdict = m.judge(l)
		claims[l.at] = append(claims[l.at], l)
	}
	for i, claim := range claims {
		m.choose(i, claim)
	}
}

// judge compares a frame with the step it serves and notes what differs and what
// could not be compared. The verdict is that of the gravest difference.
func (m *matcher) judge(l *label) product.Verdict {
	st, k := m.seq.Steps[l.at], m.seq.Profile.Keywords
	verdict := product.OK
	fail := func(v product.Verdict, format string, args ...any) {
		l.note(format, args...)
		if verdict == product.OK {
			verdict = v
		}
	}
	var absent []string
	switch {
	case l.kindWord == "":
		absent = append(absent, k.Kind)
	case l.kind != st.Kind:
		fail(product.Extra, "%s is %q where step %d is %s", k.Kind, l.kindWord, st.Step, st.Kind)
	}
	if !m.rightSize(l) {
		fail(product.WrongSize, "%s", m.sizeNote(l))
	}
	switch {
	case l.maskID == "":
		absent = append(absent, k.MaskID)
	case l.maskID != st.MaskID:
		fail(product.WrongMask, "%s is %s where step %d shows %s", k.MaskID, l.maskID, st.Step, st.MaskID)
	}
	switch {
	case math.IsNaN(l.exptime):
		absent = append(absent, k.Exptime)
	case !sameExposure(l.exptime, st.ExptimeSeconds):
		fail(product.WrongExposure, "%s is %g s where step %d asks for %g s", k.Exptime, l.exptime, st.Step, st.ExptimeSeconds)
	}
	if len(absent) > 0 {
		l.note("not checked for want of a card: %s", strings.Join(absent, ", "))
	}
	return verdict
}

func sameExposure(got, want float64) bool {
	return math.Abs(got-want) <= max(exposureSlackSeconds, exposureSlackFraction*math.Abs(want))
}

func (m *matcher) rightSize(l *label) bool {
	d := &m.seq.Profile.Detector
	return l.width == d.RawColumns() && l.height == d.RawRows() && l.planes == 1
}

func (m *matcher) sizeNote(l *label) string {
	d := &m.seq.Profile.Detector
	return fmt.Sprintf("the image has %s pixels, not %d x %d", l.size(), d.RawColumns(), d.RawRows())
}

func (l *label) size() string {
	text := fmt.Sprintf("%d x %d", l.width, l.height)
	if l.planes != 1 {
		text += fmt.Sprintf(" x %d", l.planes)
	}
	return text
}

// choose lets one of the frames that serve step i hold it: a good one before
// others, then the one taken last, then the first by name. An extra frame holds
// no step.
func (m *matcher) choose(i int, claim []*label) {
	good := func(l *label) int {
		if l.verdict == product.OK {
			return 0
		}
		return 1
	}
	claim = slices.DeleteFunc(slices.Clone(claim), func(l *label) bool { return l.verdict == product.Extra })
	slices.SortStableFunc(claim, func(a, b *label) int {
		return cmp.Or(cmp.Compare(good(a), good(b)), b.start.Compare(a.start), cmp.Compare(a.name, b.name))
	})
	for _, l := range claim {
		switch {
		case m.holders[i] == nil:
			m.holders[i] = l
		case l.verdict == product.OK:
			l.refuse(product.Duplicate, "step %d is served by %s", m.seq.Steps[i].Step, m.holders[i].name)
		default:
			l.note("of step %d, which is served by %s", m.seq.Steps[i].Step, m.holders[i].name)
		}
	}
}

// free tells whether a step still wants a good frame.
func (m *matcher) free(i int) bool {
	return m.holders[i] == nil || m.holders[i].verdict != product.OK
}
