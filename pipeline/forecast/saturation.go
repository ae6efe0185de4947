package forecast

import (
	"math"
	"slices"
)

// saturation finds the brightest pixel of the coded frames, on the rows of each source's
// middle and some rows between.
func (l *Light) saturation(f *fieldLight, c Candidate) Saturation {
	worst := Saturation{Source: -1, Limit: math.Inf(1)}
	for _, q := range l.brightRows() {
		for _, x := range f.brightColumns(q) {
			if s := l.saturationAt(f, c, x, q); s.Electrons/s.Limit > worst.Electrons/worst.Limit || worst.Electrons == 0 {
				worst = s
			}
		}
	}
	if worst.Electrons > 0 {
		worst.LongestDwellSeconds = c.DwellSeconds * worst.Limit / worst.Electrons
	}
	return worst
}

// brightRows are trace rows on which the brightest light may lie.
func (l *Light) brightRows() []int {
	s, a := l.profile.Spectrograph, l.profile.ArcsecPerU()
	var rows []int
	add := func(q float64) {
		for _, q := range []float64{math.Floor(q), math.Ceil(q)} {
			rows = append(rows, int(min(max(q, 0), float64(l.profile.Detector.Rows-1))))
		}
	}
	add(s.YCenterPx)
	for i := range l.scene.Sources {
		at := &l.scene.Sources[i]
		_, w := l.fieldPlace(at.EastArcsec, at.NorthArcsec)
		add(s.YCenterPx + w/a*s.WStepPx)
		if at.RadiusArcsec > 0 {
			add(s.YCenterPx + (w-at.RadiusArcsec)/a*s.WStepPx)
			add(s.YCenterPx + (w+at.RadiusArcsec)/a*s.WStepPx)
		}
	}
	slices.Sort(rows)
	return slices.Compact(rows)
}

// brightColumns are those of a row's brightest overlap and of the brightest light of each
// piece.
func (f *fieldLight) brightColumns(q int) []int {
	r := f.row(q)
	columns := []int{brightest(r.overlap)}
	light := make([]float64, len(r.overlap))
	for i, s := range f.sharesOf(q) {
		p := f.pieces[i]
		if p.source < 0 || s.from >= s.to {
			continue
		}
		clear(light)
		f.addShare(light, r.xi, p.still, s)
		f.addMoving(light, r.xi, p, s, q)
		columns = append(columns, brightest(light))
	}
	slices.Sort(columns)
	return slices.Compact(columns)
}

func brightest(x []float64) int {
	at := 0
	for i, v := range x {
		if v > x[at] {
			at = i
		}
	}
	return at
}

// saturationAt is the brightest a pixel becomes: with v masks of which a part k/v opens an
// element, some mask is expected to open the m brightest elements at once, v (k/v)^m >= 1,
// and k/v of the rest.
func (l *Light) saturationAt(f *fieldLight, c Candidate, x, q int) Saturation {
	light := make([]float64, c.N)
	one := make([]float64, 1)
	all := func(int) bool { return true }
	for j := range light {
		one[0] = 0
		f.element(one, j, q, x, all, false)
		light[j] = one[0]
	}
	order := make([]int, c.N)
	for j := range order {
		order[j] = j
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch {
		case light[a] > light[b]:
			return -1
		case light[a] < light[b]:
			return 1
		}
		return 0
	})
	open, together := float64(c.K)/float64(c.V), c.N
	if c.K == 1 {
		open, together = 0, 1
	} else if c.K < c.V {
		together = min(c.N, int(math.Log(float64(c.V))/-math.Log(open)))
	}
	part := func(place int) float64 {
		if place < together {
			return 1
		}
		return open
	}
	sum := 0.0
	bySource := map[int]float64{}
	for place, j := range order {
		sum += part(place) * light[j]
	}
	for i := range l.scene.Sources {
		for place, j := range order {
			if part(place) == 0 || light[j] == 0 {
				continue
			}
			one[0] = 0
			f.element(one, j, q, x, func(source int) bool { return source == i }, false)
			bySource[i] += part(place) * one[0]
		}
	}
	row := min(max(int(math.Round(float64(q)+f.light.traceShift(x))), 0), l.camera.rows-1)
	s := Saturation{Column: x, Row: row, Source: -1, Limit: l.camera.full[l.camera.amplifier(x, row)]}
	s.Electrons = (sum + l.camera.darkEPS) * c.DwellSeconds
	most := sum
	for _, v := range bySource {
		most -= v
	}
	for i := range l.scene.Sources { // in order, so that the answer is always the same
		if bySource[i] > most {
			most, s.Source = bySource[i], i
		}
	}
	if sum > 0 {
		s.SourceFraction = most / sum
	}
	return s
}

// traceShift is the rows by which the trace has left its row at a column.
func (l *Light) traceShift(x int) float64 {
	s := l.profile.Spectrograph
	d := float64(x) - s.XCenterPx
	return d * (s.TraceTilt + s.TraceCurvePerPx*d)
}
