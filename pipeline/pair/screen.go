package pair

import (
	"fmt"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// screen decides the frames of other instruments and refuses a night that is, as
// a whole, not this sequence's.
func (m *matcher) screen() error {
	key, own := m.seq.Profile.Keywords.Instrume, m.seq.Profile.Name
	var readable, foreign, sized []*label
	for _, l := range m.labels {
		if l.verdict != "" {
			continue
		}
		readable = append(readable, l)
		switch {
		case l.instrument == "":
			l.note("not checked for want of a card: %s", key)
		case l.instrument != own:
			l.refuse(product.Extra, "%s is %q, not %q", key, l.instrument, own)
			foreign = append(foreign, l)
			continue
		}
		if m.rightSize(l) {
			sized = append(sized, l)
		}
	}
	switch {
	case len(readable) == 0:
		return &Error{File: m.labels[0].path, What: fmt.Sprintf("none of the night's %s can be read, this one because of: %s",
			count(len(m.labels), "frame"), strings.Join(m.labels[0].notes, "; ")), Cure: "copy the night again from the telescope"}
	case len(foreign) == len(readable):
		return &Error{File: foreign[0].path, What: fmt.Sprintf("%s is %q, and no frame of the night is of the sequence's instrument %q", key, foreign[0].instrument, own),
			Cure: "give the night of this sequence, or a sequence planned with that instrument's profile"}
	case len(sized) == 0:
		l := firstOwn(readable)
		return &Error{File: l.path, What: m.sizeNote(l) + ", and no frame of the night has the detector's size",
			Cure: "give the night of this sequence, or correct the amplifiers' sections in the profile and plan again"}
	}
	return nil
}

func firstOwn(labels []*label) *label {
	for _, l := range labels {
		if l.verdict == "" {
			return l
		}
	}
	panic("internal error: no frame of the own instrument")
}

// checkScience refuses a night without a single science frame to use.
func (m *matcher) checkScience() error {
	for _, i := range m.seq.StepsOf(sequence.Science) {
		if l := m.holders[i]; l != nil && l.verdict.Used() {
			return nil
		}
	}
	e := &Error{File: m.dir, What: fmt.Sprintf("none of its %s serves a science step of the sequence", count(len(m.labels), "frame")),
		Cure: "give the night of this sequence, and check the profile's keywords and kinds against the headers"}
	for _, l := range m.labels {
		if !l.verdict.Used() && len(l.notes) > 0 {
			e.What += fmt.Sprintf(" (%s is %s: %s)", l.name, l.verdict, strings.Join(l.notes, "; "))
			break
		}
	}
	return e
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}
