package forecast

import (
	"fmt"
	"math"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// Candidate is a way to observe the field.
type Candidate struct {
	Family string `json:"family"`
	// V, K, L are the code's; K 0 stands for the family's usual code of V columns.
	V int `json:"v"`
	K int `json:"k"`
	L int `json:"l"`
	// N is the number of elements, ElementMirrors their width in u.
	N              int `json:"elements"`
	ElementMirrors int `json:"element_mirrors"`
	// Dark is the number of dark columns, V - N.
	Dark int `json:"dark"`
	// DwellSeconds is the exposure of a science step and of an all-off frame.
	DwellSeconds float64 `json:"dwell_s"`
	Cycles       int     `json:"cycles"`
	// Closed are rows of mirrors closed besides those of the target.
	Closed []sequence.ClosedRow `json:"closed,omitempty"`
}

// CandidateOf is how a sequence observes its field.
func CandidateOf(s *sequence.Sequence) Candidate {
	return Candidate{
		Family: s.Family, V: s.V, K: s.K, L: s.L, N: s.N(), ElementMirrors: s.ElementMirrors(), Dark: s.V - s.N(),
		DwellSeconds: s.Target.DwellSeconds, Cycles: s.Target.Code.Cycles,
	}
}

// Design is the code's parameters.
func (c Candidate) Design() hadamard.Design { return hadamard.Design{V: c.V, K: c.K, L: c.L} }

// SlitScan is the candidate's field observed element by element, its dwell not yet chosen.
func (c Candidate) SlitScan() Candidate {
	c.Family, c.V, c.K, c.L, c.Dark = string(hadamard.SlitScan), c.N, 1, 0, 0
	return c
}

// resolved fills in K and L and refuses what is no candidate.
func (l *Light) resolved(c Candidate) (Candidate, error) {
	if c.K == 0 {
		code, err := hadamard.New(hadamard.Family(c.Family), c.V)
		if err != nil {
			return c, err
		}
		c.K, c.L = code.K(), code.L()
	}
	uFirst, uLast := l.profile.URange()
	first, last := l.strip(c)
	switch width := c.N * c.ElementMirrors; {
	case c.N < 1 || c.ElementMirrors < 1 || c.Dark < 0 || c.N+c.Dark != c.V:
		return c, fmt.Errorf("%d elements of %d mirrors and %d dark columns are no use of a code of %d columns; make elements and dark columns add up", c.N, c.ElementMirrors, c.Dark, c.V)
	case width > uLast-uFirst+1:
		return c, fmt.Errorf("%d elements of %d mirrors span %d where the device has %d; give fewer or narrower ones", c.N, c.ElementMirrors, width, uLast-uFirst+1)
	case first < uFirst || last > uLast:
		return c, fmt.Errorf("%d elements of %d mirrors span u from %d to %d where the device has %d to %d; give fewer ones or a smaller field.offset_u", c.N, c.ElementMirrors, first, last, uFirst, uLast)
	case c.V > 1 && (c.K < 1 || c.K <= c.L || c.K*(c.K-1) != c.L*(c.V-1)):
		return c, fmt.Errorf("no code has v = %d, k = %d, l = %d", c.V, c.K, c.L)
	case !(c.DwellSeconds > 0) || math.IsInf(c.DwellSeconds, 0) || c.Cycles < 1:
		return c, fmt.Errorf("%d cycles of %v s are no exposures; give positive numbers", c.Cycles, c.DwellSeconds)
	}
	return c, nil
}

// strip is the first and the last u of a candidate's elements.
func (l *Light) strip(c Candidate) (first, last int) {
	width := c.N * c.ElementMirrors
	first = l.profile.FieldFirstU(width, l.target.OffsetU())
	return first, first + width - 1
}

// Time is how long a candidate takes; overheads are those of reading and of loading masks.
type Time struct {
	// ScienceSeconds is that of the coded steps and the all-off frames among them.
	ScienceSeconds float64 `json:"science_s"`
	// CalibrationSeconds is that of all other frames.
	CalibrationSeconds float64 `json:"calibration_s"`
	TotalSeconds       float64 `json:"total_s"`
	// CycleSeconds is that of one cycle.
	CycleSeconds float64 `json:"cycle_s"`
	// OpenFraction is the part of ScienceSeconds in which coded light is gathered.
	OpenFraction float64 `json:"open_fraction"`
	// Steps counts the coded steps, AllOff the all-off frames, Frames all frames.
	Steps  int `json:"steps"`
	AllOff int `json:"all_off"`
	Frames int `json:"frames"`
	// Gigabytes is the size of the raw frames, 16 bits a pixel, in 1e9 bytes.
	Gigabytes float64 `json:"gigabytes"`
}

// allOff is the number of all-off frames among so many coded steps.
func allOff(t *sequence.Target, steps int) int {
	if t.AllOffEvery == 0 {
		return 0
	}
	return 1 + (steps+t.AllOffEvery-1)/t.AllOffEvery
}

// Time counts a candidate's frames as plan lays them out.
func (l *Light) Time(c Candidate) Time {
	overhead := l.profile.OverheadS()
	t := Time{Steps: c.V * c.Cycles}
	t.AllOff = allOff(l.target, t.Steps)
	t.ScienceSeconds = float64(t.Steps+t.AllOff) * (c.DwellSeconds + overhead)
	t.CycleSeconds = t.ScienceSeconds / float64(c.Cycles)
	t.OpenFraction = float64(t.Steps) * c.DwellSeconds / t.ScienceSeconds
	frames, seconds := 0, 0.0
	add := func(count int, dwell float64) {
		frames += count
		seconds += float64(count) * (dwell + overhead)
	}
	k := l.target.Calibration
	add(k.Bias.Count, 0)
	add(k.Dark.Count, k.Dark.DwellSeconds)
	add(4*k.Flat.Count+c.V*k.Flat.CodedCycles, k.Flat.DwellSeconds)
	if k.Arc.Count > 0 {
		lit := (c.N-1)/k.Arc.Every + 1
		if (c.N-1)%k.Arc.Every != 0 {
			lit++
		}
		add(k.Arc.Count*lit, k.Arc.DwellSeconds)
	}
	if k.RefStar != nil {
		add(k.RefStar.Count, k.RefStar.DwellSeconds)
	}
	t.CalibrationSeconds = seconds
	t.TotalSeconds = t.ScienceSeconds + seconds
	t.Frames = frames + t.Steps + t.AllOff
	t.Gigabytes = float64(t.Frames) * l.frameBytes / 1e9
	return t
}

// slitDwell is the dwell with which a slit scan of so many cycles takes scienceSeconds, 0 if
// it cannot.
func (l *Light) slitDwell(n, cycles int, scienceSeconds float64) float64 {
	frames := n*cycles + allOff(l.target, n*cycles)
	return max(0, scienceSeconds/float64(frames)-l.profile.OverheadS())
}
