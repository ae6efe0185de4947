package forecast

import (
	"math"

	"mirrorloom/pipeline/sequence"
)

// Cover is the rows of mirrors, element by element, within radius arc seconds of a source,
// to be closed on it. Empty for a source out of the field.
func (l *Light) Cover(c Candidate, source int, radius float64) []sequence.ClosedRow {
	if source < 0 || source >= len(l.scene.Sources) {
		return nil
	}
	s := &l.scene.Sources[source]
	u, w := l.fieldPlace(s.EastArcsec, s.NorthArcsec)
	a := l.profile.ArcsecPerU()
	step := a * float64(c.ElementMirrors)
	wFirst, wLast := l.profile.WRange()
	var list []sequence.ClosedRow
	j0, j1 := spanOf(u, radius, step, float64(c.N-1)/2, c.N)
	for j := j0; j <= j1; j++ {
		// The nearest and with it the widest part of the strip.
		left := step * (float64(j) - float64(c.N-1)/2 - 0.5)
		dx := max(left-u, u-left-step, 0)
		if dx >= radius {
			continue
		}
		half := math.Sqrt(radius*radius - dx*dx)
		first := max(wFirst, int(math.Floor(l.profile.WCenter()+(w-half)/a)))
		last := min(wLast, int(math.Ceil(l.profile.WCenter()+(w+half)/a)))
		for _, r := range l.open(first, last, j) {
			list = append(list, sequence.ClosedRow{First: r[0], Last: r[1], Element: &j})
		}
	}
	return list
}

// open is what the target leaves open for element j of the rows first..last.
func (l *Light) open(first, last, j int) [][2]int {
	var list [][2]int
	from := first
	for w := first; w <= last+1; w++ {
		if w <= last && !l.taken(w, j) {
			continue
		}
		if from < w {
			list = append(list, [2]int{from, w - 1})
		}
		from = w + 1
	}
	return list
}

// taken tells whether the target has another use for row w of element j.
func (l *Light) taken(w, j int) bool {
	for _, r := range l.target.SentinelRows {
		if r.First <= w && w <= r.Last {
			return true
		}
	}
	for _, r := range l.target.Closed {
		if r.First <= w && w <= r.Last && (r.Element == nil || *r.Element == j) {
			return true
		}
	}
	return false
}
