package plan

import (
	"fmt"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// chooseCode settles the code and the number n of elements (see the package's
// documentation for the rule).
func chooseCode(c sequence.CodeChoice, o *optics) (*hadamard.Code, int, error) {
	family, err := hadamard.ParseFamily(c.Family)
	if err != nil {
		return nil, 0, refuse("code.family", "%v; write another", err)
	}
	if c.ElementMirrors > o.deviceU {
		return nil, 0, refuse("code.element_mirrors", "an element of %d mirrors is wider than the device's %d; give fewer", c.ElementMirrors, o.deviceU)
	}
	if c.V == nil {
		return fittingCode(c, family, o)
	}
	code, err := hadamard.New(family, *c.V)
	if err != nil {
		return nil, 0, refuse("code.v", "%v; give another size", err)
	}
	n := elementsOf(code.V(), c.Dark, family)
	if n < 1 {
		return nil, 0, refuse("code.v", "the default of %d dark columns leaves no element of the %d columns; give code.dark or a larger code.v", hadamard.DefaultDark(code.V()), code.V())
	}
	if width := n * c.ElementMirrors; width > o.deviceU {
		return nil, 0, refuse("code.v", "%d elements of %d mirrors span %d where the device has %d; give a smaller code.v, narrower elements or more code.dark", n, c.ElementMirrors, width, o.deviceU)
	}
	if !o.onDevice(n) {
		first, last := o.field(n)
		uFirst, uLast := o.profile.URange()
		return nil, 0, refuse("field.offset_u", "a field of %d elements of %d mirrors would span u from %d to %d where the device has %d to %d; give an offset from %d to %d, or a smaller field", n, c.ElementMirrors, first, last, uFirst, uLast, o.offsetU+uFirst-first, o.offsetU+uLast-last)
	}
	return code, n, nil
}

// elementsOf is the number of elements of a code of v columns: v less the dark
// ones, or less the default number of them when dark is nil.
func elementsOf(v int, dark *int, family hadamard.Family) int {
	switch {
	case family == hadamard.SlitScan:
		return v
	case dark != nil:
		return v - *dark
	}
	return v - hadamard.DefaultDark(v)
}

// fittingCode is the smallest code for as many elements as device, detector and
// family allow.
func fittingCode(c sequence.CodeChoice, family hadamard.Family, o *optics) (*hadamard.Code, int, error) {
	if !o.onDevice(1) {
		return nil, 0, refuse("field.offset_u", "the device's %d u hold no element at an offset of %d; give a smaller one", o.deviceU, o.offsetU)
	}
	byDetector := o.elementsWithWholeBand()
	if byDetector < 1 {
		return nil, 0, refuse("code.v", "the wavelength grid does not fit the detector's %d columns even for one element; give code.v, or a profile with a shorter grid", o.profile.Detector.Columns)
	}
	sizes := hadamard.Sizes(family)
	n := min(byDetector, elementsOf(sizes[len(sizes)-1], c.Dark, family))
	if n < 1 {
		return nil, 0, refuse("code.dark", "no %s code has room for %d dark columns and an element; give fewer", family, *c.Dark)
	}
	dark := -1
	if c.Dark != nil {
		dark = *c.Dark
	}
	code, err := hadamard.Smallest(family, n, dark)
	if err != nil {
		return nil, 0, refuse("code", "%v; give code.v", err)
	}
	return code, n, nil
}

// strips assigns the columns that are not dark, in order, to neighbouring
// strips of mirrors from u = next on.
func strips(next, v int, dark []int, mirrors int) []sequence.Element {
	elements := make([]sequence.Element, v)
	j := 0
	for column := range elements {
		if slices.Contains(dark, column) {
			elements[column] = sequence.Element{Column: column, Element: -1, First: -1, Last: -1, Dark: true}
			continue
		}
		elements[column] = sequence.Element{Column: column, Element: j, First: next, Last: next + mirrors - 1}
		next += mirrors
		j++
	}
	return elements
}

// checkRows looks at the target's rows as the device and the field have them;
// the errors name the target's keys.
func checkRows(t *sequence.Target, p *instrument.Profile, n int) error {
	wFirst, wLast := p.WRange()
	type span struct {
		path        string
		first, last int
		element     int // -1 for all
		sentinel    bool
	}
	var spans []span
	for i, r := range t.SentinelRows {
		spans = append(spans, span{fmt.Sprintf("sentinel_rows[%d]", i), r.First, r.Last, r.Element, true})
	}
	for i, r := range t.Closed {
		s := span{fmt.Sprintf("closed[%d]", i), r.First, r.Last, -1, false}
		if r.Element != nil {
			s.element = *r.Element
		}
		spans = append(spans, s)
	}
	for i, a := range spans {
		if a.first < wFirst || a.last > wLast {
			return refuse(a.path, "the rows %d to %d reach beyond the device's w of %d to %d; stay within", a.first, a.last, wFirst, wLast)
		}
		if a.element >= n {
			return refuse(a.path+".element", "there is no element %d among the field's 0 to %d; give one of these", a.element, n-1)
		}
		for _, b := range spans[:i] {
			whole := (a.sentinel || a.element < 0) && (b.sentinel || b.element < 0)
			if (whole || a.element == b.element) && a.first <= b.last && b.first <= a.last {
				return refuse(a.path, "the rows %d to %d overlap those of %s; give each row one use", a.first, a.last, b.path)
			}
		}
	}
	return nil
}
