package trade

import (
	"encoding/csv"
	"fmt"
	"io"
	"strconv"
	"strings"
)

// mostPrinted rows are printed; all are in the CSV file.
const mostPrinted = 12

// String is the comparison as a table for people, lines ended.
func (t *Trade) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "candidates, each of %s; S/N of %s\n", seconds(t.BudgetSeconds), t.aim())
	fmt.Fprintf(&b, "%-34s %5s %5s %8s %7s %5s %6s %9s %9s %9s %6s\n", "code", "v", "k", "elements", "mirrors", "dark", "cycles", "dwell_s", "S/N", "slit = 1", "full")
	printed, left := 0, 0
	for i := range t.Rows {
		r := &t.Rows[i]
		if printed >= mostPrinted && !r.Given && !r.Chosen && !(r.IsSlit() && r.Breaks == "") {
			left++
			continue
		}
		printed++
		b.WriteString(r.line())
	}
	if left > 0 {
		fmt.Fprintf(&b, "and %d more in trade.csv\n", left)
	}
	b.WriteString("slit = 1: over the S/N of the slit scan in the same time; full: the brightest pixel over its saturation\n")
	if r := t.planned(); r != nil && r.CycleLimit.Rule != RuleNone {
		fmt.Fprintf(&b, "\n%s\n", upper(r.CycleLimit.String()))
	}
	fmt.Fprintf(&b, "\n%s\n", t.Recommendation)
	return b.String()
}

// planned is the row that is chosen, or the given one; nil for neither.
func (t *Trade) planned() *Row {
	for i := range t.Rows {
		if t.Rows[i].Chosen {
			return &t.Rows[i]
		}
	}
	return t.Own()
}

func (r *Row) line() string {
	c := r.Candidate
	over := "-"
	if r.OverSlit > 0 {
		over = fmt.Sprintf("%.2f", r.OverSlit)
	}
	name := c.Family
	if len(r.Covered) > 0 {
		name += fmt.Sprint(", closed ", r.Covered)
	}
	note := ""
	switch {
	case r.Chosen && r.Given:
		note = "  planned"
	case r.Chosen:
		note = "  chosen"
	case r.Given:
		note = "  planned"
	}
	if r.Breaks != "" {
		note += "  no: " + r.Why
	}
	return fmt.Sprintf("%-34s %5d %5d %8d %7d %5d %6d %9.4g %9.2f %9s %6.2f%s\n", name, c.V, c.K, c.N, c.ElementMirrors, c.Dark, c.Cycles, c.DwellSeconds, r.Figure, over, r.Full, note)
}

// WriteCSV writes all rows, a header line first.
func (t *Trade) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	rows := [][]string{{"family", "v", "k", "l", "elements", "element_mirrors", "dark", "cycles", "dwell_s", "total_s", "cycle_s", "cycle_limit_s", "cycle_limit_by", "snr", "over_slit_scan", "full", "longest_dwell_s", "photon_part", "covered_sources", "use", "breaks", "why"}}
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', 6, 64) }
	for i := range t.Rows {
		r := &t.Rows[i]
		c := r.Candidate
		var covered []string
		for _, s := range r.Covered {
			covered = append(covered, strconv.Itoa(s))
		}
		use := ""
		switch {
		case r.Given:
			use = "given"
		case r.Chosen:
			use = "chosen"
		}
		rows = append(rows, []string{
			c.Family, strconv.Itoa(c.V), strconv.Itoa(c.K), strconv.Itoa(c.L), strconv.Itoa(c.N), strconv.Itoa(c.ElementMirrors), strconv.Itoa(c.Dark),
			strconv.Itoa(c.Cycles), number(c.DwellSeconds), number(r.TotalSeconds), number(r.CycleSeconds), number(r.CycleLimit.Seconds), string(r.CycleLimit.Rule), number(r.Figure), number(r.OverSlit), number(r.Full),
			number(r.LongestDwellSeconds), number(r.PhotonPart), strings.Join(covered, " "), use, string(r.Breaks), r.Why,
		})
	}
	if err := out.WriteAll(rows); err != nil {
		return fmt.Errorf("trade.csv: %w", err)
	}
	return nil
}
