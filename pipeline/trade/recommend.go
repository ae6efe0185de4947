package trade

import (
	"fmt"
	"strings"

	"mirrorloom/pipeline/sequence"
)

// telling is how much better a candidate must be to be worth a word: forecasts are right
// within 5 %.
const telling = 1.05

// sparse is the part of open columns below which a code counts as sparse: S-matrices have
// half.
const sparse = 0.45

// Choose marks the row that is planned and says what to do, and why, in one sentence. Of no
// row within the limits it says that.
func (t *Trade) Choose(target *sequence.Target, chosen *Row) {
	for i := range t.Rows {
		t.Rows[i].Chosen = false
	}
	if chosen != nil {
		chosen.Chosen = true
	}
	best, own := t.Best(), t.Own()
	switch {
	case own == nil && chosen == nil:
		t.Recommendation = t.Impossible()
	case own == nil:
		t.Recommendation = "Observe with " + t.reasons(target, chosen) + "."
	case best == nil && own.Breaks == "":
		t.Recommendation = fmt.Sprintf("Keep %s: nothing else is within the limits.", Name(own.Candidate))
	case best == nil:
		t.Recommendation = fmt.Sprintf("%s is not within the limits: %s; nothing else is, so allow %s.", upper(Name(own.Candidate)), own.Why, own.Cure)
	case own.Breaks != "":
		t.Recommendation = fmt.Sprintf("%s is not within the limits: %s; take %s.", upper(Name(own.Candidate)), own.Why, t.reasons(target, best))
	case best.Figure < telling*own.Figure:
		t.Recommendation = fmt.Sprintf("Keep %s: nothing else within the limits gives more than 5 %% more S/N of %s in its time.", Name(own.Candidate), t.aim())
	default:
		t.Recommendation = fmt.Sprintf("Better than %s, by a factor of %.2f in S/N, is %s.", Name(own.Candidate), best.Figure/own.Figure, t.reasons(target, best))
	}
}

// aim is what the figure is of.
func (t *Trade) aim() string {
	switch t.Aim {
	case sequence.AimFaintest:
		return "the faintest"
	case sequence.AimMean:
		return "all, in the mean"
	}
	return t.Aim
}

// reasons is a row with what speaks for it.
func (t *Trade) reasons(target *sequence.Target, r *Row) string {
	parts := []string{fmt.Sprintf("%s, %d x %s", Name(r.Candidate), r.Candidate.Cycles*r.Candidate.V, seconds(r.Candidate.DwellSeconds))}
	if s := t.Slit(r.Candidate.ElementMirrors); s != nil && !r.IsSlit() && s.Figure > 0 {
		parts = append(parts, fmt.Sprintf("%.2f times the slit scan's S/N of %s in the same time", r.Figure/s.Figure, t.aim()))
	}
	if r.IsSlit() {
		if code := t.code(r); code != nil {
			parts = append(parts, fmt.Sprintf("as the best code (%s) gives %.2f times its S/N of %s: %.0f %% of that code's noise is photons of everything that overlaps",
				Name(code.Candidate), code.Figure/r.Figure, t.aim(), 100*code.PhotonPart))
		} else if slow := t.quickest(r); slow != nil {
			parts = append(parts, fmt.Sprintf("as no code's cycle is short enough: with %s %s", Name(slow.Candidate), slow.Why))
		}
	} else if t.sparse(r) {
		if dense := t.dense(r); dense != nil && dense.Figure > 0 {
			parts = append(parts, fmt.Sprintf("and, as it opens only %d columns at once, %.2f times that of the best code that opens half", r.Candidate.K, r.Figure/dense.Figure))
		}
	}
	parts = append(parts, t.remedies(target, r)...)
	return strings.Join(parts, "; ")
}

// remedies say what a row does about bright stars.
func (t *Trade) remedies(target *sequence.Target, r *Row) []string {
	var parts []string
	if len(r.Covered) > 0 {
		var names []string
		for _, i := range r.Covered {
			s := target.Forecast.Sources[i]
			names = append(names, fmt.Sprintf("source %d (%s at %.1f, %.1f arcsec)", i, s.Kind, s.EastArcsec, s.NorthArcsec))
		}
		parts = append(parts, "the mirrors on "+strings.Join(names, ", ")+" closed")
	}
	if open := t.bareOf(r); len(r.Covered) > 0 && open != nil {
		switch {
		case open.Breaks == BreachSaturation:
			parts = append(parts, "which would saturate")
		case open.Figure > 0:
			parts = append(parts, fmt.Sprintf("%.2f times the S/N with them open", r.Figure/open.Figure))
		}
	}
	if r.Full > 0 && r.Candidate.DwellSeconds > 0.97*Fullest*r.LongestDwellSeconds {
		parts = append(parts, fmt.Sprintf("no longer dwell, as %s saturates after %s", sourceWords(r.Source), seconds(r.LongestDwellSeconds)))
	}
	return parts
}

// bareOf is a row's code with no mirrors closed on stars.
func (t *Trade) bareOf(r *Row) *Row {
	for i := range t.Rows {
		o := &t.Rows[i]
		if !o.Given && len(o.Covered) == 0 && o.Candidate.Family == r.Candidate.Family && o.Candidate.V == r.Candidate.V && o.Candidate.ElementMirrors == r.Candidate.ElementMirrors {
			return o
		}
	}
	return nil
}

// code is the best code of a slit scan's elements within the limits.
func (t *Trade) code(slit *Row) *Row {
	return t.find(slit, func(r *Row) bool { return !r.IsSlit() })
}

// quickest is, of the codes of a slit scan's elements whose cycles are too long, that with the
// shortest; nil for none.
func (t *Trade) quickest(slit *Row) *Row {
	var best *Row
	for i := range t.Rows {
		r := &t.Rows[i]
		if !r.IsSlit() && r.Breaks == BreachCycle && r.Candidate.ElementMirrors == slit.Candidate.ElementMirrors && (best == nil || r.CycleSeconds < best.CycleSeconds) {
			best = r
		}
	}
	return best
}

// dense is the best of a row's elements that opens half the columns or more.
func (t *Trade) dense(like *Row) *Row {
	return t.find(like, func(r *Row) bool { return !r.IsSlit() && !t.sparse(r) })
}

func (t *Trade) sparse(r *Row) bool {
	return float64(r.Candidate.K) < sparse*float64(r.Candidate.V)
}

func (t *Trade) find(like *Row, of func(*Row) bool) *Row {
	for i := range t.Rows {
		r := &t.Rows[i]
		if r.Breaks == "" && r.Candidate.ElementMirrors == like.Candidate.ElementMirrors && of(r) {
			return r
		}
	}
	return nil
}

// sourceWords names what gives most of a pixel's light.
func sourceWords(source int) string {
	if source < 0 {
		return "the sky"
	}
	return fmt.Sprintf("source %d", source)
}

// Impossible says why no row is within the limits and what would make one: of the rows that
// came nearest, those that break the limit looked at last.
func (t *Trade) Impossible() string {
	if len(t.Rows) == 0 {
		return "no code has so many columns; give another code.v, or fewer code.dark"
	}
	for _, b := range []Breach{BreachDark, BreachSteps, BreachSaturation, BreachCycle, BreachTime} {
		var near *Row
		for i := range t.Rows {
			r := &t.Rows[i]
			if r.Breaks == b && (near == nil || nearer(b, r, near)) {
				near = r
			}
		}
		if near != nil {
			return fmt.Sprintf("nothing is within the limits: %s comes nearest, but %s; it would take %s", Name(near.Candidate), near.Why, near.Cure)
		}
	}
	return ""
}

// nearer tells which of two rows breaks a limit by less.
func nearer(b Breach, r, than *Row) bool {
	switch b {
	case BreachTime:
		return r.TotalSeconds < than.TotalSeconds
	case BreachCycle:
		return r.CycleSeconds < than.CycleSeconds
	case BreachSaturation:
		return r.LongestDwellSeconds > than.LongestDwellSeconds
	}
	return r.Candidate.Dark > than.Candidate.Dark
}

func upper(s string) string { return strings.ToUpper(s[:1]) + s[1:] }
