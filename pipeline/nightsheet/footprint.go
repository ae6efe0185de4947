package nightsheet

import (
	"math"
	"slices"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Footprint is the field on the sky: offsets from the target's position, arc seconds to the
// east and to the north in the plane that touches the sphere there.
type Footprint struct {
	// Outline is what the elements and the detector see of the sky, corner by corner.
	Outline []Offset `json:"outline_arcsec"`
	// Elements are the middles of every tenth element, first and last included.
	Elements []Strip `json:"elements"`
	// Patches are rows that do not follow the code.
	Patches []Patch `json:"patches"`
	// Marks are the places wanted.
	Marks []Mark `json:"wanted"`
}

// Offset is a place: east and north, arc seconds.
type Offset [2]float64

// Strip is the middle of an element from end to end.
type Strip struct {
	Element int       `json:"element"`
	Ends    [2]Offset `json:"ends_arcsec"`
}

// Patch is a range of rows, of one element or of all, that is closed or a sentinel.
type Patch struct {
	Use string `json:"use"`
	// Element is the one closed or shown; -1 for all.
	Element int      `json:"element"`
	Outline []Offset `json:"outline_arcsec"`
}

// Mark is a place wanted.
type Mark struct {
	// Label stands for it in the drawings: A, B, ...
	Label string `json:"label"`
	Name  string `json:"name"`
	Place Offset `json:"place_arcsec"`
	// RadiusArcsec is that of its circle, 0 where plan fits one to the source.
	RadiusArcsec float64 `json:"radius_arcsec,omitempty"`
}

// footprintOf lays the field on the sky.
func footprintOf(s *sequence.Sequence) Footprint {
	field := newField(s)
	f := Footprint{Outline: field.offsets(field.outline), Elements: []Strip{}, Patches: []Patch{}, Marks: marksOf(s.Target)}
	columns := s.ElementColumns()
	last := len(columns) - 1
	for j, column := range columns {
		if j%10 != 0 && j != last {
			continue
		}
		e := s.Elements[column]
		if low, high, ok := field.outline.at(float64(e.First+e.Last) / 2); ok {
			u := float64(e.First+e.Last) / 2
			f.Elements = append(f.Elements, Strip{j, [2]Offset{field.offset(u, low), field.offset(u, high)}})
		}
	}
	for _, r := range s.Rows {
		if r.Use == sequence.UseCoded {
			continue
		}
		patch := field.outline.within(1, float64(r.First)-0.5, float64(r.Last)+0.5)
		if r.Use == sequence.UseClosed && r.Element >= 0 {
			e := s.Elements[columns[r.Element]]
			patch = patch.within(0, float64(e.First)-0.5, float64(e.Last)+0.5)
		}
		if len(patch) > 2 {
			f.Patches = append(f.Patches, Patch{r.Use, r.Element, field.offsets(patch)})
		}
	}
	return f
}

// marksOf are the places of what is wanted, in its order.
func marksOf(t *sequence.Target) []Mark {
	list := []Mark{}
	if t.Forecast == nil {
		return list
	}
	for i, w := range t.Forecast.Wanted {
		m := Mark{Label: label(i), Name: w.Name}
		switch {
		case w.Source != nil:
			s := &t.Forecast.Sources[*w.Source]
			m.Place = Offset{s.EastArcsec, s.NorthArcsec}
		default:
			m.Place = Offset{*w.EastArcsec, *w.NorthArcsec}
		}
		if w.RadiusArcsec != nil {
			m.RadiusArcsec = *w.RadiusArcsec
		}
		list = append(list, m)
	}
	return list
}

// label is A to Z, then A2 to Z2 and so on.
func label(i int) string {
	text := string(rune('A' + i%26))
	if i >= 26 {
		text += number(float64(i/26 + 1))
	}
	return text
}

// field is the coded strip on the device, in u and w.
type field struct {
	outline          polygon
	uMiddle, wMiddle float64
	arcsec           float64 // of a step in u or w
	parity, sin, cos float64
}

func newField(s *sequence.Sequence) *field {
	p := s.Profile
	f := &field{uMiddle: s.FieldCenterU(), wMiddle: p.WCenter(), arcsec: p.ArcsecPerU(), parity: float64(p.DMD.Parity)}
	f.sin, f.cos = math.Sincos(s.Target.RotangDeg * math.Pi / 180)
	columns := s.ElementColumns()
	first, last := s.Elements[columns[0]].First, s.Elements[columns[len(columns)-1]].Last
	o := p.Spectrograph
	w0 := p.WCenter() + (-0.5-o.YCenterPx)/o.WStepPx
	w1 := p.WCenter() + (float64(p.Detector.Rows)-0.5-o.YCenterPx)/o.WStepPx
	f.outline = mirrors(p.DMD).within(0, float64(first)-0.5, float64(last)+0.5).within(1, min(w0, w1), max(w0, w1))
	return f
}

// mirrors is the device's outline in u and w.
func mirrors(d instrument.DMD) polygon {
	c, r := float64(d.Columns), float64(d.Rows)
	corners := polygon{{-0.5, -0.5}, {c - 0.5, -0.5}, {c - 0.5, r - 0.5}, {-0.5, r - 0.5}}
	if d.Mounting == instrument.Diagonal {
		for i, x := range corners { // u = column + row, w = row - column
			corners[i] = [2]float64{x[0] + x[1], x[1] - x[0]}
		}
	}
	return corners
}

// offset is where u and w lie on the sky: +w at the position angle, +u a quarter turn from it,
// towards west at the position angle 0 and parity 1.
func (f *field) offset(u, w float64) Offset {
	u, w = (u-f.uMiddle)*f.arcsec, (w-f.wMiddle)*f.arcsec
	return Offset{rounded(-f.parity*f.cos*u + f.sin*w), rounded(f.parity*f.sin*u + f.cos*w)}
}

func rounded(x float64) float64 { return math.Round(x*1e3)/1e3 + 0 }

func (f *field) offsets(p polygon) []Offset {
	list := make([]Offset, len(p))
	for i, x := range p {
		list[i] = f.offset(x[0], x[1])
	}
	return list
}

// polygon is convex, corner by corner, u and w.
type polygon [][2]float64

// within is the part of a polygon in which coordinate axis lies from low to high.
func (p polygon) within(axis int, low, high float64) polygon {
	return p.cut(axis, 1, low).cut(axis, -1, -high)
}

// cut keeps sign times the coordinate at or above a limit.
func (p polygon) cut(axis int, sign, limit float64) polygon {
	var kept polygon
	for i, b := range p {
		a := p[(i+len(p)-1)%len(p)]
		da, db := sign*a[axis]-limit, sign*b[axis]-limit
		if da*db < 0 {
			t := da / (da - db)
			kept = append(kept, [2]float64{a[0] + t*(b[0]-a[0]), a[1] + t*(b[1]-a[1])})
		}
		if db >= 0 {
			kept = append(kept, b)
		}
	}
	return slices.Clip(kept)
}

// at is the range of w at a u; ok is false beside the polygon.
func (p polygon) at(u float64) (low, high float64, ok bool) {
	low, high = math.Inf(1), math.Inf(-1)
	for i, b := range p {
		a := p[(i+len(p)-1)%len(p)]
		if a[0] == b[0] || (a[0]-u)*(b[0]-u) > 0 {
			continue
		}
		w := a[1] + (u-a[0])/(b[0]-a[0])*(b[1]-a[1])
		low, high = min(low, w), max(high, w)
	}
	return low, high, low < high
}
