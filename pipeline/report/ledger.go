package report

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// ledgerView is the ledger as two tables, of rows to look at and the others,
// and its summary.
type ledgerView struct {
	Notable, Ordinary ledgerTable
	Kinds             []kindRow
}

// ledgerTable holds rows as text. A column that is empty throughout is left out.
type ledgerTable struct {
	Columns []string
	Rows    [][]string
}

// kindRow sums up the steps of a kind.
type kindRow struct {
	Kind        string
	Steps, Used int
	Others      string // the other verdicts with their numbers
}

type ledgerColumn struct {
	name string
	cell func(e *product.Entry) string
}

func ledgerColumns() []ledgerColumn {
	return []ledgerColumn{
		{"verdict", func(e *product.Entry) string { return string(e.Verdict) }},
		{"step", func(e *product.Entry) string {
			if e.Step == 0 {
				return ""
			}
			return strconv.Itoa(e.Step)
		}},
		{"file", func(e *product.Entry) string { return e.File }},
		{"kind", func(e *product.Entry) string { return e.Kind }},
		{"note", func(e *product.Entry) string { return e.Note }},
		{"mask", func(e *product.Entry) string { return e.MaskID }},
		{"matched by", func(e *product.Entry) string { return e.MatchedBy }},
		{"taken (UTC)", func(e *product.Entry) string { return e.DateObs }},
		{"exposure, s", func(e *product.Entry) string { return known(e.ExptimeS, "%g") }},
		{"saturated", func(e *product.Entry) string {
			if math.IsNaN(e.SaturatedFraction) {
				return ""
			}
			return percent(e.SaturatedFraction)
		}},
		{"throughput", func(e *product.Entry) string {
			text := known(e.Throughput, "%.4f")
			if text != "" && !math.IsNaN(e.ThroughputErr) {
				text += fmt.Sprintf(" ± %.4f", e.ThroughputErr)
			}
			return text
		}},
		{"offset, e", func(e *product.Entry) string { return known(e.OffsetE, "%.3f") }},
	}
}

func known(x float64, layout string) string {
	if math.IsNaN(x) {
		return ""
	}
	return fmt.Sprintf(layout, x)
}

func viewLedger(l product.Ledger) ledgerView {
	var notable, ordinary product.Ledger
	for _, e := range l {
		if e.Verdict == product.OK {
			ordinary = append(ordinary, e)
		} else {
			notable = append(notable, e)
		}
	}
	return ledgerView{Notable: tabulate(notable), Ordinary: tabulate(ordinary), Kinds: sumKinds(l)}
}

func tabulate(l product.Ledger) ledgerTable {
	t := ledgerTable{Rows: make([][]string, len(l))}
	for _, c := range ledgerColumns() {
		cells := make([]string, len(l))
		empty := true
		for i := range l {
			cells[i] = c.cell(&l[i])
			empty = empty && cells[i] == ""
		}
		if empty {
			continue
		}
		t.Columns = append(t.Columns, c.name)
		for i := range l {
			t.Rows[i] = append(t.Rows[i], cells[i])
		}
	}
	return t
}

// sumKinds counts the steps by kind and the frames of no step.
func sumKinds(l product.Ledger) []kindRow {
	byKind := map[string]product.Ledger{}
	var stray product.Ledger
	for _, e := range l {
		if e.Step == 0 {
			stray = append(stray, e)
		} else {
			byKind[e.Kind] = append(byKind[e.Kind], e)
		}
	}
	var rows []kindRow
	for _, k := range sequence.Kinds() {
		part := byKind[string(k)]
		if len(part) == 0 {
			continue
		}
		used := part.Count(product.OK) + part.Count(product.Relabelled)
		rows = append(rows, kindRow{Kind: string(k), Steps: len(part), Used: used, Others: others(part)})
	}
	if len(stray) > 0 {
		rows = append(rows, kindRow{Kind: "of no step", Steps: len(stray), Others: others(stray)})
	}
	return rows
}

func others(l product.Ledger) string {
	var parts []string
	for _, v := range product.Verdicts() {
		if n := l.Count(v); n > 0 && v != product.OK {
			parts = append(parts, fmt.Sprintf("%d %s", n, v))
		}
	}
	return strings.Join(parts, ", ")
}
