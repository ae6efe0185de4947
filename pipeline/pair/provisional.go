package pair

import (
	"mirrorloom/pipeline/audit"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// provisional is a group of science frames without labels, one more or one less than
// steps, that are dealt out in the order of time until the audit finds the place where
// one is missing or too many.
type provisional struct {
	group  *group
	frames []*label
	spare  *label // the last, where there is one too many
}

// oneOff tells whether a group is such a one: science frames of a single cycle, all
// that the steps have.
func (m *matcher) oneOff(g *group, frames []*label) bool {
	off := len(frames) - len(g.steps)
	if !m.audits || (off != 1 && off != -1) || !ordered(frames) {
		return false
	}
	rows := map[int]bool{}
	for _, i := range g.steps {
		st := m.seq.Steps[i]
		if st.Kind != sequence.Science || rows[st.Row] {
			return false
		}
		rows[st.Row] = true
	}
	return len(g.steps) == m.seq.V
}

// deferred deals the frames out for the audit.
func (m *matcher) deferred(g *group, frames []*label) {
	p := &provisional{group: g, frames: frames}
	for n, l := range frames {
		l.by = product.ByTime
		if n >= len(g.steps) {
			p.spare = l
			l.at, l.verdict = -1, product.Extra
			continue
		}
		l.at = g.steps[n]
		l.verdict = m.judge(l)
		m.release(l.at)
		m.holders[l.at] = l
	}
	m.provisional = p
}

// confirmed tells whether the audit is sure of the order of a provisional group. If it
// is not, the group's frames are refused as they would be without an audit.
func (m *matcher) confirmed(report *audit.Report) bool {
	p := m.provisional
	if len(report.Cycles) == 1 && (report.Cycles[0].Whole != "" || report.Cycles[0].Sure) {
		for _, l := range p.frames {
			l.note("one of %d frames for %d steps in the order of %s, placed by the audit", len(p.frames), len(p.group.steps), m.seq.Profile.Keywords.DateObs)
		}
		return true
	}
	for _, l := range p.frames {
		if l.at >= 0 && m.holders[l.at] == l {
			m.holders[l.at] = nil
		}
		l.at = -1
		l.refuse(product.Extra, "%s; nor could the audit tell", m.undecided(p.group, p.frames))
	}
	return false
}
