package plan

import (
	"context"
	"fmt"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// choice is a target with everything settled, and what speaks for it.
type choice struct {
	target *sequence.Target
	trade  *trade.Trade
	// dark are the columns that were found to stand the loss of frames, if any was asked.
	dark *hadamard.DarkSet
}

// choose settles the code of a target that leaves it to plan.
func choose(ctx context.Context, target *sequence.Target, profile *instrument.Profile) (*choice, error) {
	light, err := forecast.New(target, profile)
	if err != nil {
		return nil, err
	}
	fields, err := fieldsOf(target, profile)
	if err != nil {
		return nil, err
	}
	t, err := trade.Compare(ctx, trade.Request{
		Target: target, Profile: profile, Light: light, Fields: fields, V: target.Code.V, Dark: target.Code.Dark,
		DwellSeconds: target.DwellSeconds, Cycles: target.Code.Cycles,
	})
	if err != nil {
		return nil, err
	}
	for i := range t.Rows {
		r := &t.Rows[i]
		if r.Breaks != "" {
			break
		}
		dark, err := standsLosses(ctx, target, r)
		if err != nil {
			return nil, err
		}
		if r.Breaks == "" {
			t.Choose(target, r)
			return &choice{target: settled(target, r), trade: t, dark: dark}, nil
		}
	}
	t.Choose(target, nil)
	return nil, refuse("code.family", "%s", t.Recommendation)
}

// fieldsOf are the fields to be tried: elements of 1 mirror, 2, ... as long as two of them go
// into the seeing, or of what the target says.
func fieldsOf(target *sequence.Target, profile *instrument.Profile) ([]trade.Field, error) {
	var fields []trade.Field
	widest := int(target.Forecast.SeeingFWHMArcsec / 2 / profile.ArcsecPerU())
	first, last := 1, max(widest, 1)
	if m := target.Code.ElementMirrors; m > 0 {
		first, last = m, m
	}
	for m := first; m <= last; m++ {
		c := target.Code
		c.ElementMirrors = m
		n, err := fieldElements(c, profile, target)
		if err != nil {
			return nil, err
		}
		if n > 0 {
			fields = append(fields, trade.Field{Elements: n, Mirrors: m})
		}
	}
	if len(fields) == 0 {
		return nil, refuse("code.element_mirrors", "no field of elements of %d to %d mirrors fits device and detector; give code.v, or a profile with a shorter grid", first, last)
	}
	return fields, nil
}

// fieldElements is the number of elements of a width; 0 where none fit.
func fieldElements(c sequence.CodeChoice, profile *instrument.Profile, target *sequence.Target) (int, error) {
	like := *target
	like.Code = c
	o := newOptics(profile, &like)
	if c.V == nil {
		return o.elementsWithWholeBand(), nil
	}
	n := elementsOf(*c.V, c.Dark, hadamard.MSequence)
	if n < 1 {
		return 0, refuse("code.v", "the default of %d dark columns leaves no element of the %d columns; give code.dark or a larger code.v", hadamard.DefaultDark(*c.V), *c.V)
	}
	if !o.onDevice(n) {
		return 0, nil
	}
	return n, nil
}

// settled is the target with a row's choice filled in.
func settled(target *sequence.Target, r *trade.Row) *sequence.Target {
	t, c := *target, r.Candidate
	t.Code.Family, t.Code.V, t.Code.Dark, t.Code.ElementMirrors, t.Code.Cycles = c.Family, &c.V, &c.Dark, c.ElementMirrors, c.Cycles
	t.DwellSeconds = c.DwellSeconds
	t.Closed = append(slices.Clone(t.Closed), c.Closed...)
	return &t
}

// lossTrials are how many sets of lost frames a dark set is tried with.
const lossTrials = 50

// standsLosses looks whether the dark columns that a row gets restore the frames that the
// target wants to be able to lose, and marks the row where they do not.
func standsLosses(ctx context.Context, target *sequence.Target, r *trade.Row) (*hadamard.DarkSet, error) {
	k := target.Forecast.Limits.LostFrames
	if k == 0 || r.IsSlit() {
		return nil, nil
	}
	code, err := hadamard.New(hadamard.Family(r.Candidate.Family), r.Candidate.V)
	if err != nil {
		return nil, err
	}
	dark, err := hadamard.ChooseDark(ctx, code, r.Candidate.Dark, uint64(target.Code.Seed))
	if err != nil {
		return nil, fmt.Errorf("choosing the dark columns: %w", err)
	}
	checks, err := hadamard.NewChecks(code, dark.Columns)
	if err != nil {
		return nil, err
	}
	worst, whole, err := lossesOf(checks, k, uint64(target.Code.Seed))
	if err != nil {
		return nil, err
	}
	if !whole {
		r.Breaks = trade.BreachDark
		r.Why = fmt.Sprintf("of some sets of %d frames its %d dark columns restore fewer", k, r.Candidate.Dark)
		r.Cure = "more code.dark, another code.seed or fewer forecast.limits.lost_frames"
		return nil, nil
	}
	r.LossGrowth = worst
	return &dark, nil
}

// lossesOf tries random sets of k lost rows: whether all have full rank, and by how much the
// noise grows at worst.
func lossesOf(checks *hadamard.Checks, k int, seed uint64) (worst float64, whole bool, err error) {
	v := checks.Code().V()
	for trial := range lossTrials {
		rows := random(seed, "lost frames", trial).Perm(v)[:k]
		slices.Sort(rows)
		rank, growth, err := checks.Erasure(rows)
		if err != nil {
			return 0, false, err
		}
		if rank < k {
			return 0, false, nil
		}
		worst = max(worst, growth)
	}
	return worst, true, nil
}

// judged holds a target's own code against the others.
func judged(ctx context.Context, s *sequence.Sequence) (*trade.Trade, error) {
	target := s.Target
	if target.Forecast == nil || len(target.Forecast.Wanted) == 0 {
		return nil, nil
	}
	light, err := forecast.New(target, s.Profile)
	if err != nil {
		return nil, err
	}
	given := forecast.CandidateOf(s)
	t, err := trade.Compare(ctx, trade.Request{
		Target: target, Profile: s.Profile, Light: light, Given: &given,
		Fields: []trade.Field{{Elements: s.N(), Mirrors: s.ElementMirrors()}},
	})
	if err != nil {
		return nil, err
	}
	t.Choose(target, nil)
	return t, nil
}
