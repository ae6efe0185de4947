package sequence

import (
	"math"
	"slices"
)

// check finds the first inconsistency of a sequence, masks and digests aside.
// It returns a *Error without a file, or nil.
func (s *Sequence) check() error {
	code, err := s.checkCode()
	if err != nil {
		return err
	}
	for _, check := range []func() error{s.checkTarget, s.checkElements, s.checkRows} {
		if err := check(); err != nil {
			return err
		}
	}
	return s.checkSteps(code)
}

func (s *Sequence) checkCode() (*codeRows, error) {
	if !isFamily(s.Family) {
		return nil, fault("FAMILY %q is no code family (%s)", s.Family, familyList())
	}
	if !hasSize(s.Family, s.V) {
		return nil, fault("CODEV %d is no size of the family %s", s.V, s.Family)
	}
	code, err := newCodeRows(s.Family, s.V, s.Poly)
	if err != nil {
		return nil, err
	}
	if s.K != code.k || s.L != code.l {
		return nil, fault("CODEK %d and CODEL %d are not those of the %s code of %d columns (%d and %d)", s.K, s.L, s.Family, s.V, code.k, code.l)
	}
	return code, nil
}

// checkTarget compares the code with what the resolved target says of it.
func (s *Sequence) checkTarget() error {
	c := s.Target.Code
	if c.Family != s.Family {
		return fault("FAMILY is %s where target.yaml has %s", s.Family, c.Family)
	}
	if c.V == nil || *c.V != s.V {
		return fault("CODEV is %d where target.yaml has another code.v, or none", s.V)
	}
	if dark := len(s.DarkColumns()); c.Dark == nil || *c.Dark != dark {
		return fault("ELEMENTS has %d dark columns where target.yaml has another code.dark, or none", dark)
	}
	if c.Seed < 0 || uint64(c.Seed) != s.OrderSeed {
		return fault("ORDSEED is %d where target.yaml has code.seed %d", s.OrderSeed, c.Seed)
	}
	return nil
}

// checkElements demands neighbouring strips of the target's width in order.
func (s *Sequence) checkElements() error {
	if len(s.Elements) != s.V {
		return fault("ELEMENTS has %d rows where the code has %d columns", len(s.Elements), s.V)
	}
	u := s.device().u()
	width, n, next := s.Target.Code.ElementMirrors, 0, 0
	for i, e := range s.Elements {
		if e.Column != i {
			return fault("ELEMENTS row %d has COLUMN %d, not %d", i+1, e.Column, i)
		}
		if e.Dark {
			if e.Element != -1 || e.First != -1 || e.Last != -1 {
				return fault("ELEMENTS row %d gives mirrors to a dark column", i+1)
			}
			continue
		}
		switch {
		case e.Element != n:
			return fault("ELEMENTS row %d has ELEMENT %d where element %d is next in order", i+1, e.Element, n)
		case e.First < u.first || e.Last > u.last:
			return fault("ELEMENTS row %d reaches from %d to %d, off the device's u of %d to %d", i+1, e.First, e.Last, u.first, u.last)
		case e.Last-e.First+1 != width:
			return fault("ELEMENTS row %d reaches from %d to %d where target.yaml has code.element_mirrors %d", i+1, e.First, e.Last, width)
		case n > 0 && e.First < next:
			return fault("ELEMENTS row %d begins at %d, which overlaps the element before it", i+1, e.First)
		case n > 0 && e.First > next:
			return fault("ELEMENTS row %d begins at %d, which leaves a gap behind the element before it", i+1, e.First)
		}
		n, next = n+1, e.Last+1
	}
	if n == 0 {
		return fault("ELEMENTS has dark columns only")
	}
	return nil
}

func (s *Sequence) checkSteps(code *codeRows) error {
	if len(s.Steps) == 0 {
		return fault("STEPS has no row")
	}
	if len(s.Code) != len(s.Steps) {
		return fault("CODE has %d rows where STEPS has %d", len(s.Code), len(s.Steps))
	}
	for i, st := range s.Steps {
		if st.Step != i+1 {
			return fault("STEPS row %d has STEP %d, not %d: each step comes once, in order", i+1, st.Step, i+1)
		}
		if err := s.checkStep(i); err != nil {
			return err
		}
		if err := s.checkBits(i, code); err != nil {
			return err
		}
	}
	return s.checkCycles()
}

// checkStep looks at all of a step but its code bits.
func (s *Sequence) checkStep(i int) error {
	st := s.Steps[i]
	if !slices.Contains(Kinds(), st.Kind) {
		return fault("step %d has the unknown KIND %q", st.Step, st.Kind)
	}
	lit := st.Kind == Flat || st.Kind == Arc
	switch {
	case lit && !printable(st.Lamp, maxLampBytes):
		return fault("step %d of kind %s has no LAMP", st.Step, st.Kind)
	case !lit && st.Lamp != "":
		return fault("step %d is no lamp frame and has LAMP %q", st.Step, st.Lamp)
	case math.IsNaN(st.ExptimeSeconds) || math.IsInf(st.ExptimeSeconds, 0):
		return fault("step %d has no finite EXPTIME", st.Step)
	case st.Kind == Bias && st.ExptimeSeconds != 0:
		return fault("step %d of kind bias has EXPTIME %v, not 0", st.Step, st.ExptimeSeconds)
	case st.Kind != Bias && st.ExptimeSeconds <= 0:
		return fault("step %d has EXPTIME %v, not above 0", st.Step, st.ExptimeSeconds)
	case st.Row < -1 || st.Row >= s.V:
		return fault("step %d has ROW %d where the code has rows 0 to %d", st.Step, st.Row, s.V-1)
	case st.Kind == Science && st.Row < 0:
		return fault("step %d is a science step without a code ROW", st.Step)
	case st.Row >= 0 && (st.Kind == Bias || st.Kind == Dark || st.Kind == AllOn || st.Kind == AllOff || st.Kind == RefStar):
		return fault("step %d is of kind %s and has the code ROW %d, not -1", st.Step, st.Kind, st.Row)
	case (st.Row >= 0) != (st.Cycle >= 1) || st.Cycle < 0:
		return fault("step %d has ROW %d and CYCLE %d: cycles count from 1 for code rows and are 0 without", st.Step, st.Row, st.Cycle)
	}
	return nil
}

// checkBits compares a step's bits with its code row or lamp pattern.
func (s *Sequence) checkBits(i int, code *codeRows) error {
	st, bits := s.Steps[i], s.Code[i]
	if len(bits) != s.V {
		return fault("CODE row %d has %d bits where the code has %d columns", i+1, len(bits), s.V)
	}
	ones := 0
	for _, b := range bits {
		if b > 1 {
			return fault("CODE row %d holds %d, which is no bit", i+1, b)
		}
		ones += int(b)
	}
	switch {
	case st.Row >= 0 && !code.shows(bits, st.Row):
		return fault("CODE row %d is not row %d of the %s code of %d columns, as STEPS says", i+1, st.Row, s.Family, s.V)
	case st.Row >= 0:
	case st.Kind == AllOn && ones != s.V:
		return fault("CODE row %d belongs to a step of kind all-on and is not 1 throughout", i+1)
	case (st.Kind == Bias || st.Kind == Dark || st.Kind == AllOff) && ones != 0:
		return fault("CODE row %d belongs to a step of kind %s and is not 0 throughout", i+1, st.Kind)
	case st.Kind == RefStar:
		return s.checkWide(i)
	default:
		if p, _ := s.Pattern(i); p == PatternOther {
			return fault("CODE row %d shows neither a code row nor all, no, every other or one element", i+1)
		}
	}
	return nil
}

// checkWide demands of a refstar step that it opens the elements that the target names,
// and no dark column.
func (s *Sequence) checkWide(i int) error {
	star := s.Target.Calibration.RefStar
	if star == nil {
		return fault("step %d is of kind refstar where target.yaml has no calibration.refstar", s.Steps[i].Step)
	}
	if first, last, ok := s.WideElement(i); !ok || [2]int{first, last} != star.Elements {
		return fault("CODE row %d does not open the elements %d to %d, as calibration.refstar of target.yaml says", i+1, star.Elements[0], star.Elements[1])
	}
	for _, column := range s.DarkColumns() {
		if s.Code[i][column] != 0 {
			return fault("CODE row %d belongs to a step of kind refstar and opens the dark column %d", i+1, column)
		}
	}
	return nil
}

// checkCycles demands that the cycles of each kind are complete.
func (s *Sequence) checkCycles() error {
	type cycle struct {
		kind   Kind
		number int
	}
	seen := map[cycle][]bool{}
	highest := map[Kind]int{}
	for _, st := range s.Steps {
		if st.Row < 0 {
			continue
		}
		c := cycle{st.Kind, st.Cycle}
		if seen[c] == nil {
			seen[c] = make([]bool, s.V)
		}
		if seen[c][st.Row] {
			return fault("step %d repeats ROW %d in %s cycle %d", st.Step, st.Row, st.Kind, st.Cycle)
		}
		seen[c][st.Row] = true
		highest[st.Kind] = max(highest[st.Kind], st.Cycle)
	}
	for _, kind := range Kinds() {
		for number := 1; number <= highest[kind]; number++ {
			if row := slices.Index(seen[cycle{kind, number}], false); row >= 0 || seen[cycle{kind, number}] == nil {
				return fault("%s cycle %d lacks code row %d", kind, number, max(row, 0))
			}
		}
	}
	return nil
}
