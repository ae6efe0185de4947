package sequence

import "mirrorloom/pipeline/instrument"

// PlacedMirror is a mirror that does not move, with what the sequence has in its place.
type PlacedMirror struct {
	instrument.StuckMirror
	// U and W are the mirror's place, Element the element that it belongs to, -1 outside
	// the strips.
	U, W, Element int
	// Use is what its row does there: UseCoded, UseSentinel, or UseClosed, also where it
	// is closed for its element alone. Empty outside the strips.
	Use string
}

// Coded tells whether the mirror should follow the code.
func (m PlacedMirror) Coded() bool { return m.Element >= 0 && m.Use == UseCoded }

// StuckMirrors places the profile's stuck mirrors, in the order of their file.
func (s *Sequence) StuckMirrors() []PlacedMirror {
	var all []PlacedMirror
	for _, m := range s.Profile.Stuck() {
		p := PlacedMirror{StuckMirror: m, U: m.Column, W: m.Row, Element: -1}
		if s.Profile.DMD.Mounting == instrument.Diagonal {
			p.U, p.W = m.Column+m.Row, m.Row-m.Column
		}
		for _, e := range s.Elements {
			if !e.Dark && p.U >= e.First && p.U <= e.Last {
				p.Element = e.Element
				p.Use = s.useOf(p.W, e.Element)
			}
		}
		all = append(all, p)
	}
	return all
}

// useOf is what mirror row w does in an element.
func (s *Sequence) useOf(w, element int) string {
	use := UseCoded
	for _, r := range s.Rows {
		if w < r.First || w > r.Last {
			continue
		}
		switch {
		case r.Use == UseClosed && (r.Element < 0 || r.Element == element):
			return UseClosed
		case r.Use == UseSentinel:
			use = UseSentinel
		}
	}
	return use
}
