package pair

import (
	"context"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"mirrorloom/pipeline/audit"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Audit is what the dark columns say of a night's pairing.
type Audit struct {
	// Skipped says why nothing was audited; empty if it was.
	Skipped string       `json:"skipped,omitempty"`
	Cycles  []AuditCycle `json:"cycles"`
}

// AuditCycle is the verdict on one cycle of the code.
type AuditCycle struct {
	Cycle int `json:"cycle"`
	// Samples and Rows are the size of the sample, Chi2 the dark columns' chi-square per
	// degree of freedom with the pairing that was found.
	Samples int     `json:"samples"`
	Rows    int     `json:"rows"`
	Chi2    float64 `json:"chi2"`
	// Sure tells that every exchange of two frames is excluded, or would be harmless.
	Sure bool `json:"sure"`
	// Whole says how all frames are paired otherwise than labelled.
	Whole          string  `json:"whole,omitempty"`
	WholeLog10Odds float64 `json:"whole_log10_odds,omitempty"`
	// AllInverted: every mask is inverted.
	AllInverted bool           `json:"all_inverted,omitempty"`
	Findings    []AuditFinding `json:"findings"`
}

// AuditFinding is a frame that does not show the mask of its label.
type AuditFinding struct {
	File string `json:"file"`
	Step int    `json:"step"` // of its label; 0 for none
	Kind string `json:"kind"`
	// Shows is the step whose mask it shows, 0 for none.
	Shows   int `json:"shows,omitempty"`
	Mirrors int `json:"mirrors,omitempty"`
	// Log10Odds are the odds against the label; Sigma the rms change of voxels in units
	// of their errors.
	Log10Odds float64 `json:"log10_odds"`
	Sigma     float64 `json:"sigma"`
	Harmless  bool    `json:"harmless,omitempty"`
	Repaired  bool    `json:"repaired,omitempty"`
	// Text is all of it in words.
	Text string `json:"text"`
}

// Warnings are sentences for a user: what was found, and what was done about it.
func (a *Audit) Warnings() []string {
	return a.warnings(func(*AuditFinding) bool { return true })
}

// warnings are Warnings, of the frames' findings those that are wanted.
func (a *Audit) warnings(wanted func(*AuditFinding) bool) []string {
	if a == nil {
		return nil
	}
	if a.Skipped != "" {
		return []string{"the pairing was not audited: " + a.Skipped}
	}
	var all []string
	for _, c := range a.Cycles {
		if c.AllInverted {
			all = append(all, fmt.Sprintf("cycle %d: every mask is inverted, so that all light comes out negative; plan the sequence for a device whose mirrors are on where these are off, and take the night again, or correct the frames' masks", c.Cycle))
		}
		if c.Whole != "" {
			all = append(all, fmt.Sprintf("cycle %d: its frames are %s (odds %s to 1)", c.Cycle, c.Whole, odds(c.WholeLog10Odds)))
		}
		for i := range c.Findings {
			if f := &c.Findings[i]; wanted(f) {
				all = append(all, f.sentence())
			}
		}
	}
	return all
}

// sentence is a finding with its file.
func (f *AuditFinding) sentence() string { return "frame " + f.File + " " + f.Text }

// Inverted tells whether a whole cycle's masks are inverted.
func (a *Audit) Inverted() bool {
	return a != nil && slices.ContainsFunc(a.Cycles, func(c AuditCycle) bool { return c.AllInverted })
}

// odds writes 10^x, to tell sure from surer.
func odds(log10 float64) string {
	if log10 < 6 {
		return fmt.Sprintf("%.3g", math.Pow(10, log10))
	}
	return fmt.Sprintf("10^%.0f", math.Floor(log10))
}

// audit has the dark columns judge the pairing of the science frames, and corrects it
// unless the labels are to be kept.
func (m *matcher) audit(ctx context.Context, opts Options) (*Audit, error) {
	var frames []audit.Frame
	owner := map[string]*label{}
	for _, i := range m.seq.StepsOf(sequence.Science) {
		if l := m.holders[i]; l != nil && l.verdict.Used() {
			frames = append(frames, audit.Frame{Source: l.source(i), Start: l.start})
			owner[l.path] = l
		}
	}
	if p := m.provisional; p != nil && p.spare != nil {
		frames = append(frames, audit.Frame{Source: p.spare.source(-1), Start: p.spare.start})
		owner[p.spare.path] = p.spare
	}
	report, err := audit.Run(ctx, m.seq, frames, audit.Options{
		Pedestals: m.pedestals(), ScratchDir: opts.ScratchDir, Workers: opts.Workers, Progress: opts.AuditProgress,
	})
	if err != nil {
		return nil, fmt.Errorf("audit of the pairing: %w", err)
	}
	out := &Audit{Skipped: report.Skipped, Cycles: []AuditCycle{}}
	if m.provisional != nil && !m.confirmed(report) {
		return out, nil
	}
	for _, c := range report.Cycles {
		out.Cycles = append(out.Cycles, m.describe(&c, !opts.AsLabelled))
		if !opts.AsLabelled {
			m.repair(&c, owner)
		}
	}
	if !opts.AsLabelled {
		m.acrossCycles(report.Cycles, owner)
	}
	m.noteFindings(out, owner)
	return out, nil
}

func (l *label) source(i int) exposure.Source {
	return exposure.Source{Path: l.path, Name: l.name, HDU: l.hdu, Step: i, Entry: i}
}

// pedestals are frames without light, the best kind that there is: dark frames as long
// as science frames, other dark frames, bias frames.
func (m *matcher) pedestals() []exposure.Source {
	seconds := 0.0
	for _, i := range m.seq.StepsOf(sequence.Science) {
		seconds = m.seq.Steps[i].ExptimeSeconds
	}
	choose := func(kind sequence.Kind, fits func(s float64) bool) []exposure.Source {
		var all []exposure.Source
		for _, i := range m.seq.StepsOf(kind) {
			if l := m.holders[i]; l != nil && l.verdict.Used() && fits(m.seq.Steps[i].ExptimeSeconds) {
				all = append(all, l.source(i))
			}
		}
		return all
	}
	any := func(float64) bool { return true }
	if dark := choose(sequence.Dark, func(s float64) bool { return s == seconds }); len(dark) > 0 {
		return dark
	}
	return choose(sequence.Bias, any)
}

// harmless tells whether all frames that a finding is about can stay as they are.
func harmless(c *audit.CycleReport, f audit.Finding) bool {
	if f.Kind == audit.Moved {
		return false
	}
	if f.Kind == audit.Exchanged {
		for _, other := range c.Findings {
			if other.Row == f.Shows && !other.Harmless() {
				return false
			}
		}
	}
	return f.Harmless()
}

// repair gives the frames of a cycle to the steps whose masks they show. Frames that
// show none of their own are of a wrong mask.
func (m *matcher) repair(c *audit.CycleReport, owner map[string]*label) {
	keep := map[int]bool{} // frames that stay
	for _, f := range c.Findings {
		if harmless(c, f) {
			keep[f.Frame] = true
		}
	}
	to := map[int]int{} // step of each frame
	for k, frame := range c.Pairing {
		if frame >= 0 && !keep[frame] {
			to[frame] = c.Steps[k]
		}
	}
	for i, frame := range c.Frames {
		if keep[i] {
			to[i] = frame.Step
		}
	}
	for i := range c.Steps {
		if s := c.Steps[i]; s >= 0 && m.holders[s] != nil && owner[m.holders[s].path] != nil {
			m.holders[s] = nil
		}
	}
	for i, frame := range c.Frames {
		l := owner[frame.Path]
		step, paired := to[i]
		switch {
		case !paired && l.by == product.ByTime:
			l.refuse(product.Extra, "the audit found no step that it serves")
		case !paired:
			l.verdict = product.WrongMask
		case step != frame.Step && l.by == product.ByTime:
			l.at, l.by = step, product.ByAudit
			l.verdict = m.judge(l)
			m.holders[step] = l
		case step != frame.Step:
			l.at, l.by, l.verdict = step, product.ByAudit, product.Relabelled
			m.holders[step] = l
		default:
			m.holders[step] = l
		}
	}
	// A wrong frame is shown in its step's row if no other frame is.
	for i, frame := range c.Frames {
		if _, paired := to[i]; !paired && frame.Step >= 0 && owner[frame.Path].verdict != product.Extra && m.holders[frame.Step] == nil {
			m.holders[frame.Step] = owner[frame.Path]
		}
	}
}

// acrossCycles uses frames that show the mask of a row whose frame in another cycle is
// wrong or missing.
func (m *matcher) acrossCycles(cycles []audit.CycleReport, owner map[string]*label) {
	for _, c := range cycles {
		for _, f := range c.Findings {
			l := owner[c.Frames[f.Frame].Path]
			if f.Kind != audit.Stale || l.verdict != product.WrongMask {
				continue
			}
			for _, i := range m.seq.StepsOf(sequence.Science) {
				st, held := m.seq.Steps[i], m.holders[i]
				if st.Row != f.Shows || st.Cycle == c.Cycle || held != nil && held.verdict.Used() {
					continue
				}
				if m.holders[l.at] == l {
					m.holders[l.at] = nil
				}
				l.at, l.by, l.verdict = i, product.ByAudit, product.Relabelled
				m.holders[i] = l
				break
			}
		}
	}
}

// describe says in words what was found in a cycle.
func (m *matcher) describe(c *audit.CycleReport, repairs bool) AuditCycle {
	out := AuditCycle{
		Cycle: c.Cycle, Samples: c.Pixels, Rows: c.Rows, Chi2: c.Chi2, Sure: c.Sure,
		Whole: c.Whole, WholeLog10Odds: c.WholeLogOdds / math.Ln10, AllInverted: c.AllInverted, Findings: []AuditFinding{},
	}
	for _, f := range c.Findings {
		frame := c.Frames[f.Frame]
		a := AuditFinding{
			File: filepath.Base(frame.Path), Kind: string(f.Kind), Mirrors: f.Mirrors, Log10Odds: min(f.LogOdds/math.Ln10, 1e6),
			Sigma: f.Sigma, Harmless: harmless(c, f),
		}
		if frame.Step >= 0 {
			a.Step = m.seq.Steps[frame.Step].Step
		}
		if f.Shows >= 0 && c.Steps[f.Shows] >= 0 {
			a.Shows = m.seq.Steps[c.Steps[f.Shows]].Step
		}
		a.Repaired = f.Repaired() && repairs && !a.Harmless
		a.Text = a.words(repairs)
		out.Findings = append(out.Findings, a)
	}
	return out
}

// words describe a finding, without the file: what is wrong, what was done, how sure it is.
func (f *AuditFinding) words(repairs bool) string {
	var b strings.Builder
	switch audit.Kind(f.Kind) {
	case audit.Exchanged, audit.Moved, audit.Stale:
		fmt.Fprintf(&b, "is labelled step %d but shows the mask of step %d", f.Step, f.Shows)
		if audit.Kind(f.Kind) == audit.Exchanged {
			b.WriteString(" (the two steps' frames are exchanged)")
		}
	case audit.Inverted:
		fmt.Fprintf(&b, "shows the mask of its step %d inverted", f.Step)
	case audit.Flipped:
		fmt.Fprintf(&b, "shows the mask of its step %d flipped along the dispersion", f.Step)
	case audit.Slipped:
		fmt.Fprintf(&b, "shows the mask of its step %d shifted by %+d mirrors along u", f.Step, f.Mirrors)
	default:
		fmt.Fprintf(&b, "shows neither the mask of its step %d nor another one of the sequence", f.Step)
	}
	switch {
	case f.Harmless:
		b.WriteString("; used as it is, since that changes no voxel noticeably")
	case !repairs:
		b.WriteString("; used as labelled")
	case f.Repaired:
		fmt.Fprintf(&b, "; used for step %d", f.Shows)
	default:
		b.WriteString("; not used")
	}
	fmt.Fprintf(&b, "; odds %s to 1, voxels change by %.2g of their errors", odds(f.Log10Odds), f.Sigma)
	return b.String()
}

// noteFindings writes what was found into the ledger's notes.
func (m *matcher) noteFindings(a *Audit, owner map[string]*label) {
	said := map[string]bool{}
	for _, c := range a.Cycles {
		for i := range c.Findings {
			f := &c.Findings[i]
			for _, l := range owner {
				if l.name != f.File {
					continue
				}
				if l.verdict == product.Relabelled && !f.Repaired { // by another cycle
					f.Repaired, f.Shows = true, m.seq.Steps[l.at].Step
					f.Text = f.words(true)
				}
				l.note("%s", f.Text)
				said[l.path] = true
			}
		}
	}
	for path, l := range owner {
		if l.verdict == product.Relabelled && !said[path] {
			l.note("the audit found the whole cycle shifted: it shows the mask of step %d", m.seq.Steps[l.at].Step)
		} else if l.verdict == product.WrongMask && !said[path] {
			l.note("the audit found the whole cycle shifted, and no mask of the sequence in this frame")
		}
	}
}
