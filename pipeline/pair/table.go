package pair

import (
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"

	"mirrorloom/pipeline/product"
)

// Print writes a ledger as text for people: the number of each verdict, then a
// table of the rows that are not ok, or of all if verbose is set.
func Print(w io.Writer, l product.Ledger, verbose bool) error {
	var b strings.Builder
	b.WriteString(summary(l) + "\n")
	rows := [][]string{{"step", "file", "kind", "matched by", "verdict", "date-obs", "exptime", "note"}}
	for _, e := range l {
		if verbose || e.Verdict != product.OK {
			rows = append(rows, row(e))
		}
	}
	if len(rows) > 1 {
		b.WriteString("\n")
		align(&b, rows)
	}
	if _, err := io.WriteString(w, b.String()); err != nil {
		return fmt.Errorf("print the ledger: %w", err)
	}
	return nil
}

// Print writes what the audit found behind the ledger l that Print wrote: a line a cycle, and a
// line for each frame whose row, with the finding in its note, was not shown. Nothing without
// an audit.
func (a *Audit) Print(w io.Writer, l product.Ledger, verbose bool) error {
	if a == nil {
		return nil
	}
	var b strings.Builder
	b.WriteString("\n")
	for _, c := range a.Cycles {
		fmt.Fprintf(&b, "audit of cycle %d: squares of the dark columns' decodes are %.3f times what noise makes them, in %d samples of %d detector rows", c.Cycle, c.Chi2, c.Samples, c.Rows)
		if len(c.Findings) == 0 && c.Whole == "" && !c.AllInverted {
			b.WriteString("; no frame was found to show another mask than that of its step")
		}
		if !c.Sure {
			b.WriteString("; the light is too faint to exclude every exchange of two frames")
		}
		b.WriteString("\n")
	}
	shown := map[string]bool{}
	for _, e := range l {
		shown[e.File] = verbose || e.Verdict != product.OK
	}
	for _, text := range a.warnings(func(f *AuditFinding) bool { return !shown[f.File] }) {
		b.WriteString(text + "\n")
	}
	if _, err := io.WriteString(w, b.String()); err != nil {
		return fmt.Errorf("print the audit: %w", err)
	}
	return nil
}

// summary is one line: "271 steps: 270 ok, 1 missing; besides: 2 duplicate".
func summary(l product.Ledger) string {
	var steps, others product.Ledger
	for _, e := range l {
		if e.Step > 0 {
			steps = append(steps, e)
		} else {
			others = append(others, e)
		}
	}
	text := count(len(steps), "step") + ": " + tally(steps)
	if len(others) > 0 {
		text += fmt.Sprintf("; %s of no step: %s", count(len(others), "frame"), tally(others))
	}
	return text
}

func tally(l product.Ledger) string {
	var parts []string
	for _, v := range product.Verdicts() {
		if n := l.Count(v); n > 0 {
			parts = append(parts, fmt.Sprintf("%d %s", n, v))
		}
	}
	return strings.Join(parts, ", ")
}

func row(e product.Entry) []string {
	step, exptime := "-", "-"
	if e.Step > 0 {
		step = strconv.Itoa(e.Step)
	}
	if !math.IsNaN(e.ExptimeS) {
		exptime = strconv.FormatFloat(e.ExptimeS, 'g', 6, 64) + " s"
	}
	cells := []string{step, e.File, e.Kind, e.MatchedBy, string(e.Verdict), e.DateObs, exptime, e.Note}
	for i, c := range cells {
		if c == "" && i < len(cells)-1 {
			cells[i] = "-"
		}
	}
	return cells
}

// align writes rows in columns, two spaces apart.
func align(b *strings.Builder, rows [][]string) {
	width := make([]int, len(rows[0]))
	for _, r := range rows {
		for i, c := range r {
			width[i] = max(width[i], utf8.RuneCountInString(c))
		}
	}
	for _, r := range rows {
		var line strings.Builder
		for i, c := range r {
			line.WriteString(c)
			line.WriteString(strings.Repeat(" ", width[i]-utf8.RuneCountInString(c)+2))
		}
		b.WriteString(strings.TrimRight(line.String(), " ") + "\n")
	}
}
