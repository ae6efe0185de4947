package pair

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"unicode"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// night writes the ledger and the list of frames to be used.
func (m *matcher) night() *Night {
	n := &Night{Dir: m.dir}
	holds := map[*label]bool{}
	for i, st := range m.seq.Steps {
		l := m.holders[i]
		if l == nil {
			e := product.NewEntry(st.Step)
			e.Kind, e.MaskID, e.Verdict = string(st.Kind), st.MaskID, product.Missing
			n.Ledger = append(n.Ledger, e)
			continue
		}
		holds[l] = true
		e := l.entry(st.Step)
		e.Kind, e.MatchedBy = string(st.Kind), l.by
		if e.MaskID == "" {
			e.MaskID = st.MaskID
		}
		n.Ledger = append(n.Ledger, e)
		if l.verdict.Used() {
			n.Frames = append(n.Frames, l.frame(i, st.Kind))
		}
	}
	rest := slices.DeleteFunc(slices.Clone(m.labels), func(l *label) bool { return holds[l] })
	slices.SortStableFunc(rest, func(a, b *label) int { return strings.Compare(a.name, b.name) })
	for _, l := range rest {
		n.Ledger = append(n.Ledger, l.entry(0))
	}
	return n
}

// Unserved says what steps have no frame that can be used, a sentence a reason: none where
// every step has one.
func (n *Night) Unserved() []string {
	var science, others []string
	for _, e := range n.Ledger {
		switch {
		case e.Step == 0 || e.Verdict.Used():
		case sequence.Kind(e.Kind) == sequence.Science:
			science = append(science, strconv.Itoa(e.Step))
		default:
			others = append(others, strconv.Itoa(e.Step))
		}
	}
	var all []string
	for _, part := range []struct {
		steps      []string
		of, advice string
	}{{science, "science", "repeat them, or see how reduce restores them from the dark columns"}, {others, "calibration", "repeat them, or see what reduce does without"}} {
		if len(part.steps) > 0 {
			all = append(all, fmt.Sprintf("%s without a frame that can be used: %s; %s", count(len(part.steps), part.of+" step"), few(part.steps), part.advice))
		}
	}
	if n.Audit.Inverted() {
		all = append(all, "every mask of a cycle is inverted")
	}
	return all
}

// few lists steps, the first ones where they are many.
func few(steps []string) string {
	const most = 12
	if len(steps) <= most {
		return strings.Join(steps, ", ")
	}
	return fmt.Sprintf("%s and %d more", strings.Join(steps[:most], ", "), len(steps)-most)
}

func (l *label) frame(i int, kind sequence.Kind) Frame {
	return Frame{StepIndex: i, Kind: kind, Path: l.path, HDU: l.hdu, Start: l.start, Airmass: l.airmass}
}

// entry is the frame's line of the ledger.
func (l *label) entry(step int) product.Entry {
	e := product.NewEntry(step)
	e.File, e.Verdict = l.name, l.verdict
	e.MaskID, e.DateObs, e.ExptimeS = oneLine(l.maskID), oneLine(l.dateObs), l.exptime
	if e.Kind = string(l.kind); e.Kind == "" {
		e.Kind = oneLine(l.kindWord)
	}
	e.Note = oneLine(strings.Join(l.notes, "; "))
	return e
}

// oneLine keeps what a damaged header holds from breaking the table's lines.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(s, "?"))
}
