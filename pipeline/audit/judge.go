package audit

import (
	"math"
	"slices"
)

// sureLogOdds is the natural logarithm of the odds at which a pairing is believed:
// 1e6 to 1.
var sureLogOdds = math.Log(1e6)

// unexplained is how many standard deviations of the noise a pairing's excess must have
// for others of all frames to be looked at.
const unexplained = 2

// Judge finds the pairing of a cycle's frames that the dark columns speak for.
//
// Hypotheses are weighed by half the difference of their chi-square over the scatter
// of the better one (1 where the noise explains it), less the logarithm of the number
// of hypotheses of their kind. Faults are taken one by one, the best first, as long as
// the odds are beyond 1e6 to 1; frames that the frame test calls wrong and that nothing
// explains are taken out. Errors are hadamard's of too few dark columns.
func Judge(c *Cycle) (*Verdict, error) {
	v, _, err := judge(c)
	return v, err
}

// judge gives the state of the best pairing too, nil without one.
func judge(c *Cycle) (*Verdict, *state, error) {
	e, err := newEngine(c)
	if err != nil {
		return nil, nil, err
	}
	base := e.newState(c.Pairing, nil)
	v := &Verdict{Pairing: slices.Clone(c.Pairing), Pixels: e.pixels}
	if base == nil || e.pixels == 0 {
		return v, nil, nil
	}
	few := e.newHunt(base)
	few.run()
	best := few
	dark := float64(e.pixels) * float64(e.freedom)
	// What noise explains needs no other order: one that is wrong all over would have
	// left much more, or the sample is too small to tell.
	if few.state.excess > unexplained*math.Sqrt(2*dark) {
		name, whole, tried := e.searchWhole()
		if whole == nil {
			return best.verdict(v), best.state, nil
		}
		q := whole.scatter()
		gain, further := base.excess-whole.excess, few.state.excess-whole.excess
		odds := separation{gain, dark}.logOdds(gain)/q - math.Log(float64(tried))
		better := separation{further, dark}.logOdds(further) / q
		if odds > sureLogOdds && better > sureLogOdds && whole.excess < base.excess/2 {
			v.Whole, v.WholeLogOdds = name, odds
			best = e.newHunt(whole)
			best.run()
		}
	}
	return best.verdict(v), best.state, nil
}

// verdict finishes the hunt and says what it found.
func (h *hunt) verdict(v *Verdict) *Verdict {
	h.finish()
	v.Pairing = slices.Clone(h.state.from)
	for k, off := range h.state.erased {
		if off {
			v.Pairing[k] = none
		}
	}
	v.Findings = h.findings
	v.Chi2 = 1
	if h.state.expected > 0 {
		v.Chi2 = 1 + h.state.excess/h.state.expected
	}
	v.Sure, v.Wanted = h.state.sure()
	v.NegativeSigmas = h.state.negative()
	v.AllInverted = v.NegativeSigmas > negativeSigmas
	return v
}

// negativeSigmas is how far below nothing the sum of all light must lie to be called
// negative.
const negativeSigmas = 10

// negative is by how many standard errors the light of all elements is below that of
// the dark columns: the sum over the elements' decodes less n times the mean of the dark
// ones. Masks that are all inverted add a constant to dark decodes and turn the light.
func (s *state) negative() float64 {
	if s.Level == nil {
		return 0
	}
	w := make([]float64, len(s.Elements))
	for j := range w {
		w[j] = 1
	}
	t := s.prediction(w)
	flat := s.prediction(make([]float64, len(w))) // the pedestal
	sum, variance := 0.0, 0.0
	for k, m := range s.from {
		if x := t[k] - flat[k]; m != none && !s.erased[k] {
			sum += x * s.factor[k] * s.Level[m]
			variance += x * x * s.noise[k]
		}
	}
	if variance == 0 {
		return 0
	}
	return -sum / math.Sqrt(variance)
}

// hunt looks for single wrong frames.
type hunt struct {
	*engine
	start, state *state
	// moves are those made, in order.
	moves    []move
	findings []Finding
	// common is the excess that a frame has where nothing is wrong with it, by errors
	// of the model (seeing, guiding, neighbours); 0 where noise explains all.
	common float64
}

func (e *engine) newHunt(s *state) *hunt {
	return &hunt{engine: e, start: s, state: s, common: s.common()}
}

// common takes the worst frames out, a third as many as there are checks, and gives the
// median excess of the rest.
func (s *state) common() float64 {
	if s.excess < 4*math.Sqrt(2*float64(s.pixels)*float64(s.freedom)) {
		return 0
	}
	for range s.freedom / 3 {
		ratio, worst := s.frameTests(), 0
		for k, r := range ratio {
			if r > ratio[worst] {
				worst = k
			}
		}
		without := s.apply(move{kind: Unknown, row: worst, other: none})
		if without == nil {
			break
		}
		s = without
	}
	var known []float64
	for _, r := range s.frameTests() {
		if r > 0 {
			known = append(known, r)
		}
	}
	excess := median(known) - 1
	if excess < 4*math.Sqrt(2/(float64(s.pixels)*float64(s.freedom))) {
		return 0
	}
	return excess * float64(s.pixels)
}

// run makes moves until none is sure: at most half as many rows are taken out as there
// are checks.
func (h *hunt) run() {
	for h.state.freedom > h.freedom/2 && len(h.moves) < h.v {
		if !h.step() {
			return
		}
	}
}

// step makes the move of the largest gain, if any is sure.
func (h *hunt) step() bool {
	var chosen move
	var after *state
	gain, sure := 0.0, false
	for _, m := range h.state.scan() {
		next, excess := h.state.merit(m)
		if next == nil {
			continue
		}
		m.gain = h.state.excess - excess
		sure = sure || h.logOdds(m, next) > sureLogOdds
		if m.gain > gain {
			chosen, after, gain = m, next, m.gain
		}
	}
	if !sure {
		after = nil
	}
	if after == nil {
		rows := h.state.suspects(FalseAlarm, h.common)
		if len(rows) == 0 {
			return false
		}
		chosen = move{kind: Unknown, row: rows[0], other: none}
		if after = h.state.apply(chosen); after == nil {
			return false
		}
	}
	h.moves = append(h.moves, chosen)
	h.state = after
	return true
}

// plain is how many times the common excess of a frame a move must gain: errors of the
// model are no independent samples, so that the odds alone would find order in them.
// What an exchange gains by them is at most a part of what the two frames have, and
// the worst of some hundred frames has about twenty medians.
const plain = 20

// logOdds are those of a move against leaving all as it is.
func (h *hunt) logOdds(m move, after *state) float64 {
	if m.gain < plain*h.common {
		return math.Inf(-1)
	}
	n := float64(h.v)
	hypotheses := n * n
	var p separation
	switch m.kind {
	case Exchanged:
		hypotheses = n * n / 2
		p = after.exchange(min(m.row, m.other), max(m.row, m.other))
	case Inverted, Flipped:
		hypotheses = n
		p = after.between(m.row, h.weightsOf(m), h.bits(m.row))
	case Slipped:
		hypotheses = n * float64(len(h.slips()))
		p = after.between(m.row, h.weightsOf(m), h.bits(m.row))
	default:
		p = after.between(m.row, h.weightsOf(m), h.bits(m.row))
	}
	return p.logOdds(m.gain)/after.scatter() - math.Log(hypotheses)
}

// finish gives every frame that was moved or taken out its name, with the faults of
// the others gone: what the frame shows, by the misfit of its readings with all masks.
func (h *hunt) finish() {
	label := map[int]int{} // row by frame
	for k, m := range h.start.from {
		if m != none {
			label[m] = k
		}
	}
	h.pardon(label)
	h.settle(label)
	s := h.state
	for k, m := range s.from {
		if m != none && s.erased[k] {
			h.findings = append(h.findings, h.name(m, k, label[m]))
		}
	}
	h.fill()
	slices.SortStableFunc(h.findings, func(a, b Finding) int { return a.Row - b.Row })
}

// pardon takes back erased frames that show their own row's mask after all, once the
// others' faults are gone.
func (h *hunt) pardon(label map[int]int) {
	for again, tries := true, 0; again && tries <= h.v; tries++ {
		again = false
		for k, off := range h.state.erased {
			m := h.state.from[k]
			if !off || m == none || label[m] != k {
				continue
			}
			d, noise := h.state.misfit(k, h.bits(k))
			if d/noise > threshold(FalseAlarm, h.v, h.pixels)*h.state.scatter() || h.name(m, k, k).LogOdds > sureLogOdds {
				continue
			}
			erased := slices.Clone(h.state.erased)
			erased[k] = false
			if next := h.newState(h.state.from, erased); next != nil {
				h.state, again = next, true
			}
		}
	}
}

// settle lists the frames that moved, and puts back those that the odds no longer speak
// for, once the others' faults are gone.
func (h *hunt) settle(label map[int]int) {
	for again, tries := true, 0; again && tries <= h.v; tries++ {
		again, h.findings = false, nil
		for k, m := range h.state.from {
			if m == none || h.state.erased[k] || label[m] == k {
				continue
			}
			f, back := h.moved(label, m, k)
			if f.LogOdds < sureLogOdds && back != nil {
				h.state, again = back, true
				break
			}
			h.findings = append(h.findings, f)
		}
	}
}

// moved is the finding of a frame that shows row k in place of its label. Its odds are
// those against putting back all frames that changed places with it, in a circle, as
// the state back has it.
func (h *hunt) moved(label map[int]int, frame, k int) (f Finding, back *state) {
	f = Finding{Kind: Moved, Frame: frame, Row: label[frame], Shows: k, LogOdds: math.Inf(1)}
	// The frames that changed places, from row to row; each leaves before any returns.
	var circle []int
	from := slices.Clone(h.state.from)
	for at := k; len(circle) < h.v; {
		m := h.state.from[at]
		if m == none || h.state.erased[at] {
			break
		}
		circle = append(circle, m)
		from[at] = none
		if at = label[m]; at == k {
			break
		}
	}
	for _, m := range circle {
		from[label[m]] = m
	}
	round := len(circle) - 1
	if round == 1 {
		f.Kind = Exchanged
	}
	erased := slices.Clone(h.state.erased)
	erased[k] = true
	if back = h.newState(from, h.state.erased); back == nil {
		return f, nil
	}
	gain := back.excess - h.state.excess
	p := separation{gain, float64(h.pixels) * float64(round+1) / 2}
	if f.Kind == Exchanged {
		p = h.state.exchange(min(k, f.Row), max(k, f.Row))
	}
	f.LogOdds = p.logOdds(gain)/h.state.scatter() - float64(round+1)*math.Log(float64(h.v))
	if s := h.newState(h.state.from, erased); s != nil {
		own, noise := s.misfit(k, h.bits(f.Row))
		f.Sigma = s.change(own, noise, k, h.bits(f.Row))
	}
	return f, back
}

// change is the rms of the change that a misfit makes in voxels, in their errors.
func (s *state) change(misfit, noise float64, k int, w []float64) float64 {
	if noise <= 0 {
		return 0
	}
	return math.Sqrt(max(0, misfit-noise) / float64(s.pixels) * s.strength(k, w) / float64(s.v))
}

// name finds out what the frame of an erased row k shows.
func (h *hunt) name(frame, k, label int) Finding {
	s := h.state
	own, noise := s.misfit(k, h.bits(label))
	f := Finding{Kind: Unknown, Frame: frame, Row: label, Shows: none, Sigma: s.change(own, noise, k, h.bits(label))}
	all := s.names(k, label)
	m, tried := best(all, 1)[0], len(all)
	lowest := -m.gain
	f.Kind, f.Shows, f.Mirrors = m.kind, m.other, m.mirrors
	q := s.scatter()
	p := s.between(k, s.weightsOf(m), h.bits(label))
	f.LogOdds = p.logOdds((own/noise-lowest)*float64(h.pixels))/q - math.Log(float64(tried))
	// A name that leaves much of the misfit unexplained is none.
	if ratio := own / noise / q; lowest/q > threshold(FalseAlarm, tried, h.pixels)+(ratio-1)/10 || f.LogOdds < sureLogOdds {
		f.Kind, f.Shows, f.Mirrors = Unknown, none, 0
		f.LogOdds = float64(h.pixels) / 2 * (ratio - 1 - math.Log(max(ratio, 1)))
	}
	return f
}

// fill uses frames that were found to show the mask of a row without a frame.
func (h *hunt) fill() {
	for i := range h.findings {
		f := &h.findings[i]
		if f.Kind != Stale || !h.state.erased[f.Shows] {
			continue
		}
		at := slices.Index(h.state.from, f.Frame)
		from, erased := slices.Clone(h.state.from), slices.Clone(h.state.erased)
		from[at], from[f.Shows] = from[f.Shows], f.Frame
		erased[f.Shows] = false
		if next := h.newState(from, erased); next != nil {
			h.state, f.Kind = next, Moved
		}
	}
}
