package rehearse

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/pipeline/sequence"
)

// Fault is something that goes wrong in a night, with its size.
type Fault struct {
	Name string  `json:"name"`
	Size float64 `json:"size"`
}

// The faults. Random values are drawn anew for each frame.
const (
	// Drift: relative rms of the throughput of science, all-on and all-off
	// frames, mean 1 over the science frames.
	Drift = "drift"
	// Trend: total span of a throughput linear in time from the first such frame
	// to the last.
	Trend = "trend"
	// Colour: rms of a throughput slope, the difference between the grid's ends.
	Colour = "colour"
	// SkyLines: relative rms of the sky's lines against everything else.
	SkyLines = "sky"
	// Offset: rms, in electrons, of a pedestal of a whole frame, overscan
	// included; every frame of the night has one.
	Offset = "offset"
	// Leak: part of the light that off mirrors send on, in the mean of the field,
	// with 20 % rms of structure over it, mirrors outside the field included.
	Leak = "leak"
	// Cosmic: struck samples (pixel x frame) per 1000, in all frames that are
	// exposed, in tracks of 1 to 10 pixels.
	Cosmic = "cosmic"
	// Lost: number of science frames that were not written.
	Lost = "lost"
	// Mislabel: number of science frames exchanged in pairs (STEP and MASKID).
	Mislabel = "mislabel"
	// Seeing: relative rms of the seeing's width in frames of the sky.
	Seeing = "seeing"
	// Guide: rms, in elements, of the field's place along u and along w.
	Guide = "guide"
	// Shift: rms, in pixels, of the image's place along x and along y, in all
	// frames with light; mean 0 over the science frames.
	Shift = "shift"
	// Persist: part of the charge of each frame that appears in the next.
	Persist = "persist"
	// Neighbour: d of the neighbour term at the profile's center_nm; it grows in
	// proportion to the wavelength.
	Neighbour = "neighbour"
	// Stale: number of science frames that show the mask of the science step
	// before.
	Stale = "stale"
	// Flip: masks flipped along u, of N science frames or, without a size, of
	// all frames.
	Flip = "flip"
	// Invert: masks inverted within the elements, of N science frames or,
	// without a size, of all frames.
	Invert = "invert"
)

// faultRule says what sizes a fault may have.
type faultRule struct {
	name        string
	least, most float64
	count       bool // a whole number of science frames
	bare        bool // may stand without a size
}

var faultRules = []faultRule{
	{name: Drift, least: 0, most: 0.5},
	{name: Trend, least: -1.8, most: 1.8},
	{name: Colour, least: 0, most: 0.5},
	{name: SkyLines, least: 0, most: 1},
	{name: Offset, least: 0, most: 1e4},
	{name: Leak, least: 0, most: 0.2},
	{name: Cosmic, least: 0, most: 100},
	{name: Lost, count: true, most: math.Inf(1)},
	{name: Mislabel, count: true, most: math.Inf(1)},
	{name: Seeing, least: 0, most: 0.5},
	{name: Guide, least: 0, most: 10},
	{name: Shift, least: 0, most: 1},
	{name: Persist, least: 0, most: 0.5},
	{name: Neighbour, least: 0, most: 0.2},
	{name: Stale, count: true, most: math.Inf(1)},
	{name: Flip, count: true, bare: true, most: math.Inf(1)},
	{name: Invert, count: true, bare: true, most: math.Inf(1)},
}

// FaultNames lists the faults in the order of their explanation.
func FaultNames() []string {
	names := make([]string, len(faultRules))
	for i, r := range faultRules {
		names[i] = r.name
	}
	return names
}

func ruleOf(name string) (faultRule, bool) {
	i := slices.IndexFunc(faultRules, func(r faultRule) bool { return r.name == name })
	if i < 0 {
		return faultRule{}, false
	}
	return faultRules[i], true
}

// ParseFault reads NAME=SIZE; flip and invert may stand without a size, which
// reads as 0 and means all frames.
func ParseFault(text string) (Fault, error) {
	name, size, sized := strings.Cut(text, "=")
	rule, known := ruleOf(name)
	if !known {
		return Fault{}, fmt.Errorf("fault %q: there is no fault of this name; the faults are %s", text, strings.Join(FaultNames(), ", "))
	}
	if !sized {
		if rule.bare {
			return Fault{Name: name}, nil
		}
		return Fault{}, fmt.Errorf("fault %q: it has no size; write %s=SIZE", text, name)
	}
	value, err := strconv.ParseFloat(size, 64)
	if err != nil {
		return Fault{}, fmt.Errorf("fault %q: the size is no number; write it like %s=1", text, name)
	}
	f := Fault{Name: name, Size: value}
	if rule.bare && value == 0 {
		return Fault{}, fmt.Errorf("fault %q: no frame; leave the fault out, or the size for all frames", text)
	}
	return f, f.check()
}

// check looks at a fault by itself.
func (f Fault) check() error {
	rule, known := ruleOf(f.Name)
	switch {
	case !known:
		return fmt.Errorf("fault %s: there is no fault of this name; the faults are %s", f.Name, strings.Join(FaultNames(), ", "))
	case !(f.Size >= rule.least && f.Size <= rule.most) || math.IsInf(f.Size, 0):
		return fmt.Errorf("fault %s=%v: the size is outside %v to %v; give one in this range", f.Name, f.Size, rule.least, rule.most)
	case rule.count && f.Size != math.Trunc(f.Size):
		return fmt.Errorf("fault %s=%v: the size counts frames; give a whole number", f.Name, f.Size)
	case f.Name == Mislabel && math.Mod(f.Size, 2) != 0:
		return fmt.Errorf("fault mislabel=%v: frames are exchanged in pairs; give an even number", f.Size)
	}
	return nil
}

// checkFaults looks at the faults of a night together.
func checkFaults(faults []Fault, seq *sequence.Sequence) error {
	science := len(seq.StepsOf(sequence.Science))
	seen := map[string]bool{}
	for _, f := range faults {
		if err := f.check(); err != nil {
			return err
		}
		if seen[f.Name] {
			return fmt.Errorf("fault %s is given twice; give it once", f.Name)
		}
		seen[f.Name] = true
		rule, _ := ruleOf(f.Name)
		most := science
		if f.Name == Stale {
			most-- // the first science step has none before it
		}
		if rule.count && f.Size > float64(max(most, 0)) {
			return fmt.Errorf("fault %s=%v: the sequence has %d science frames that it can befall; give a smaller number", f.Name, f.Size, max(most, 0))
		}
	}
	return nil
}

// sizeOf is the size of a fault; on is false where it is not asked for.
func sizeOf(faults []Fault, name string) (size float64, on bool) {
	for _, f := range faults {
		if f.Name == name {
			rule, _ := ruleOf(name)
			return f.Size, f.Size != 0 || rule.bare
		}
	}
	return 0, false
}
