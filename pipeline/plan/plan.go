package plan

import (
	"context"
	"errors"
	"fmt"
	"path/filepath"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/register"
	"mirrorloom/pipeline/sequence"
)

// Options of Run.
type Options struct {
	// Target and Profile are paths, or names of embedded files.
	Target, Profile string
	// Registration is the path of a registration of the instrument (package register), by
	// which the telescope is to be pointed; empty for none.
	Registration string
	// Out is the folder to write into, made if there is none. It must hold no
	// sequence; giving it its final name when it is whole is the caller's part. Empty, the
	// plan is made and nothing is written.
	Out string
	// Sheet, if not nil, writes what the observer takes along into the folder, when all else
	// of the sequence is there: nightsheet.Write, which is above this package.
	Sheet func(dir string, s *sequence.Sequence, r *Summary) error
}

// Run plans and writes a sequence. Errors are one sentence that names file or
// key and the cure; a folder in which Run failed or was cancelled is to be
// removed.
func Run(ctx context.Context, o Options) (*Summary, error) {
	profile, err := instrument.Load(o.Profile)
	if err != nil {
		return nil, err
	}
	target, err := sequence.LoadTarget(o.Target)
	if err != nil {
		return nil, err
	}
	registration, err := readRegistration(o.Registration, profile)
	if err != nil {
		return nil, err
	}
	s, summary, err := Build(ctx, target, profile)
	if err != nil {
		var c *config.Error
		if errors.As(err, &c) && c.File == "" {
			c.File = o.Target
		}
		return nil, err
	}
	if err := ctx.Err(); err != nil {
		return nil, err
	}
	if registration != nil {
		summary.Pointing = pointingOf(registration, s)
	}
	if o.Out == "" {
		return summary, nil
	}
	if err := s.Write(ctx, o.Out); err != nil {
		return nil, err
	}
	if err := writeTrade(o.Out, summary.Trade); err != nil {
		return nil, err
	}
	if registration != nil {
		if err := registration.Write(filepath.Join(o.Out, register.File)); err != nil {
			return nil, err
		}
	}
	summary.SequenceSHA = s.SHA
	summary.Masks = countMasks(s)
	if o.Sheet != nil {
		if err := o.Sheet(o.Out, s, summary); err != nil {
			return nil, err
		}
	}
	return summary, nil
}

// Build plans a sequence in memory: masks are named when it is written. The
// target is left as it is; the sequence's own has code.v and code.dark filled
// in, and all that a target of code.family auto leaves open. Errors about the target are a
// *config.Error with the key path.
func Build(ctx context.Context, target *sequence.Target, profile *instrument.Profile) (_ *sequence.Sequence, _ *Summary, err error) {
	if err := profile.Validate(); err != nil {
		return nil, nil, fmt.Errorf("profile: %w", err)
	}
	if err := target.Check(); err != nil {
		return nil, nil, err
	}
	if target, err = withFieldRows(target, profile); err != nil {
		return nil, nil, err
	}
	if !target.Code.Auto() {
		s, summary, err := build(ctx, target, profile, nil)
		if err != nil {
			return nil, nil, err
		}
		if err := summary.warnCycle(s, false); err != nil {
			return nil, nil, err
		}
		summary.Trade, err = judged(ctx, s)
		return s, summary, err
	}
	c, err := choose(ctx, target, profile)
	if err != nil {
		return nil, nil, err
	}
	s, summary, err := build(ctx, c.target, profile, c.dark)
	if err != nil {
		return nil, nil, err
	}
	if err := summary.warnCycle(s, true); err != nil {
		return nil, nil, err
	}
	summary.Trade = c.trade
	return s, summary, nil
}

// build plans a target of which everything is settled; chosen are its dark columns, nil where
// they are to be chosen.
func build(ctx context.Context, target *sequence.Target, profile *instrument.Profile, chosen *hadamard.DarkSet) (*sequence.Sequence, *Summary, error) {
	o := newOptics(profile, target)
	if err := o.checkRowsSeen(); err != nil {
		return nil, nil, err
	}
	code, n, err := chooseCode(target.Code, o)
	if err != nil {
		return nil, nil, err
	}
	if err := o.checkField(n); err != nil {
		return nil, nil, err
	}
	if err := checkRows(target, profile, n); err != nil {
		return nil, nil, err
	}
	if star := target.Calibration.RefStar; star != nil && star.Elements[1] >= n {
		return nil, nil, refuse("calibration.refstar.elements[1]", "there is no element %d among the field's 0 to %d; give one of these", star.Elements[1], n-1)
	}
	if chosen == nil {
		dark, err := hadamard.ChooseDark(ctx, code, code.V()-n, uint64(target.Code.Seed))
		if err != nil {
			return nil, nil, fmt.Errorf("choosing the dark columns: %w", err)
		}
		chosen = &dark
	}
	dark := *chosen
	picked, err := pick(ctx, target, profile, code, dark.Columns)
	if err != nil {
		return nil, nil, err
	}
	target = picked.target
	if err := checkRows(target, profile, n); err != nil {
		return nil, nil, err
	}
	orders, err := scienceOrders(target.Code.Order, code, dark.Columns, target.Code.Cycles, uint64(target.Code.Seed))
	if err != nil {
		return nil, nil, err
	}
	s := assemble(target, profile, code, dark.Columns, orders)
	if len(s.Steps) > maxSteps {
		return nil, nil, refuse("code.cycles", "the target asks for %d exposures where a sequence has at most %d; ask for fewer cycles or calibration frames", len(s.Steps), maxSteps)
	}
	summary := summarize(s, code, dark, o)
	summary.Picked = picked.picked
	summary.Warnings = append(summary.Warnings, picked.warnings...)
	if summary.ShortNights, err = shortNights(s, code, dark.Columns, orders); err != nil {
		return nil, nil, err
	}
	if err := summary.addForecast(ctx, s); err != nil {
		return nil, nil, err
	}
	summary.judgeCalibrations(s)
	return s, summary, nil
}

// maxSteps bounds the memory of a plan: its code bits are maxSteps * v bytes.
const maxSteps = 20000

// assemble makes the sequence of a code whose dark columns are chosen.
func assemble(target *sequence.Target, profile *instrument.Profile, code *hadamard.Code, dark []int, orders [][]int) *sequence.Sequence {
	resolved := *target
	v, g := code.V(), len(dark)
	resolved.Code.V, resolved.Code.Dark = &v, &g
	wFirst, wLast := profile.WRange()
	s := &sequence.Sequence{
		Family: string(code.Family()), V: v, K: code.K(), L: code.L(), Poly: code.Poly(),
		OrderSeed: uint64(target.Code.Seed),
		Elements:  strips(profile.FieldFirstU((v-g)*target.Code.ElementMirrors, target.OffsetU()), v, dark, target.Code.ElementMirrors),
		Rows:      target.RowRanges(wFirst, wLast),
		Profile:   profile,
		Target:    &resolved,
	}
	newExposures(s, code, orders).night()
	return s
}

// refuse makes an error about a key of the target.
func refuse(path, format string, args ...any) error {
	return &config.Error{Path: path, What: fmt.Sprintf(format, args...)}
}

func countMasks(s *sequence.Sequence) int {
	seen := map[string]bool{}
	for _, st := range s.Steps {
		seen[st.MaskID] = true
	}
	return len(seen)
}
