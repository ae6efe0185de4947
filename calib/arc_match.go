package calib

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// ArcMatch says how certain the recognition of the lines is.
type ArcMatch struct {
	// ShiftPx and Scale are the best pair: light lies ShiftPx beyond nominal at L_c,
	// and the dispersion is 1 + Scale times nominal.
	ShiftPx, Scale float64
	// Score is the mean number of lines of a frame that the best pair explains; Second
	// that of the best pair with another meaning: it puts half of the lines more than 3
	// px elsewhere.
	Score, Second float64
	// Found is the mean number of lines seen in a frame, Listed of those listed on the
	// detector under the best pair.
	Found, Listed float64
}

// What makes a match certain. Any two lines can be matched by shift and scale, and
// four by the dispersion's four parameters: the fifth is the first to prove anything.
// Chance matches one line in eight (a dense lamp has a line each 10 px, within
// +-matchPx): a wrong pair rarely explains half of them (none of 500 drawn lamps in
// TestWrongLamps).
const (
	leastLines    = 5
	leastFraction = 0.55 // Score over min(Found, Listed)
	mostRivalry   = 0.75 // Second over Score
)

// Accumulator cells: matchPx is how far a line may be from where a pair puts it, for
// what the pair does not know (an element's width off by 0.1 % is 0.1 px at the end
// of the field).
const (
	shiftStep = 0.2 // px
	matchPx   = 0.6
	apartPx   = 3.0
)

// feature is a listed line, or lines that one peak cannot tell apart.
type feature struct {
	nm    float64
	clean bool // one line, whose neighbours cannot move it by more than blendPx
}

const (
	// mergeFWHM: nearer lines, in FWHM, make one peak.
	mergeFWHM = 1.2
	// disturbFWHM: nearer ones make two peaks, but may move each other where one is
	// too weak to be seen.
	disturbFWHM = 1.5
	// blendPx is the largest shift by a neighbour that a line may have and enter the
	// fit.
	blendPx = 0.01
	// intensityTrust is the factor by which the ratio of two listed intensities may be
	// off: three each way for both.
	intensityTrust = 9
)

// features merges lines that make one peak.
func features(lines []LampLine, pxPerNM, fwhmPx float64) []feature {
	lines = slices.Clone(lines)
	slices.SortFunc(lines, func(a, b LampLine) int { return cmp.Compare(a.VacuumNM, b.VacuumNM) })
	var list []feature
	for i := 0; i < len(lines); {
		n := 1
		for i+n < len(lines) && (lines[i+n].VacuumNM-lines[i+n-1].VacuumNM)*pxPerNM < mergeFWHM*fwhmPx {
			n++
		}
		brightest := slices.MaxFunc(lines[i:i+n], func(a, b LampLine) int { return cmp.Compare(a.Intensity, b.Intensity) })
		f := feature{nm: brightest.VacuumNM, clean: disturbance(brightest, lines, pxPerNM, fwhmPx) <= blendPx}
		if !f.clean {
			f.nm = centre(lines[i : i+n])
		}
		list = append(list, f)
		i += n
	}
	return list
}

// disturbance bounds the shift of a line by the listed lines about it, px.
func disturbance(line LampLine, lines []LampLine, pxPerNM, fwhmPx float64) float64 {
	moved := 0.0
	for _, l := range lines {
		if d := math.Abs(l.VacuumNM-line.VacuumNM) * pxPerNM; d < disturbFWHM*fwhmPx {
			ratio := intensityTrust * l.Intensity / line.Intensity
			moved += d * ratio / (1 + ratio)
		}
	}
	return moved
}

// centre is the mean wavelength, weighted by intensity.
func centre(lines []LampLine) float64 {
	sum, total := 0.0, 0.0
	for _, l := range lines {
		sum, total = sum+l.VacuumNM*l.Intensity, total+l.Intensity
	}
	return sum / total
}

// matcher looks for the shift and scale that explain the tracks of all frames, by
// voting (Hough's transform in the form of Duda and Hart 1972, Commun. ACM 15, 11):
// each pair of a track and a line votes for all shifts and scales that would put the
// line there. Lines that are missing or unknown, whatever their intensity, cost or
// add a vote in the place they would; they cannot move the others.
type matcher struct {
	nominal  *Geometry
	tracks   []track
	features [][]feature // by frame
	rule     ArcRule
	frames   int
}

// votes counts for each cell the tracks that have a line within matchPx, each track
// once.
type votes struct {
	shifts, scales int
	count          []float64 // [scale][shift]
	scaleStep      float64
}

func (m *matcher) newVotes() *votes {
	// A step in scale moves the farthest line by shiftStep.
	far := 1.0
	for _, list := range m.features {
		for _, f := range list {
			far = max(far, math.Abs(m.nominal.disperse(f.nm-m.nominal.L_c)))
		}
	}
	v := &votes{scaleStep: shiftStep / far}
	v.scales = 2*int(math.Ceil(m.rule.Scale/v.scaleStep)) + 1
	v.shifts = 2*int(math.Ceil(m.rule.ShiftPx/shiftStep)) + 1
	v.count = make([]float64, v.scales*v.shifts)
	return v
}

func (v *votes) shift(i int) float64 { return float64(i-v.shifts/2) * shiftStep }
func (v *votes) scale(i int) float64 { return float64(i-v.scales/2) * v.scaleStep }

// vote fills the accumulator. A track's votes for neighbouring shifts that several
// lines share count once.
func (m *matcher) vote() *votes {
	v := m.newVotes()
	marked := make([]int, v.shifts) // the number of the track that marked a shift last
	for k := range v.scales {
		row := v.count[k*v.shifts : (k+1)*v.shifts]
		clear(marked)
		for i := range m.tracks {
			t := &m.tracks[i]
			for _, f := range m.features[t.frame] {
				shift := t.x - m.place(t.element, f.nm, v.scale(k))
				low := max(0, int(math.Ceil((shift-matchPx)/shiftStep))+v.shifts/2)
				high := min(v.shifts-1, int(math.Floor((shift+matchPx)/shiftStep))+v.shifts/2)
				for s := low; s <= high; s++ {
					if marked[s] != i+1 {
						marked[s] = i + 1
						row[s]++
					}
				}
			}
		}
	}
	return v
}

// place is where a line of an element crosses q = 0 without shift.
func (m *matcher) place(element int, nm, scale float64) float64 {
	g := m.nominal
	return g.X_c + g.X_e*(float64(element)-g.J_c) + (1+scale)*g.disperse(nm-g.L_c)
}

// match finds the best pair and its rival.
func (m *matcher) match() (ArcMatch, error) {
	v := m.vote()
	best := 0
	for i, n := range v.count {
		if n > v.count[best] {
			best = i
		}
	}
	shift, scale := m.sharpen(v.shift(best%v.shifts), v.scale(best/v.shifts))
	result := ArcMatch{ShiftPx: shift, Scale: scale,
		Score: v.count[best] / float64(m.frames), Found: float64(len(m.tracks)) / float64(m.frames)}
	for i, n := range v.count {
		if m.differs(v.shift(i%v.shifts)-shift, v.scale(i/v.shifts)-scale) {
			result.Second = max(result.Second, n/float64(m.frames))
		}
	}
	result.Listed = m.listed(shift, scale)
	return result, m.judge(result)
}

// sharpen fits shift and scale to the pairs within matchPx of a cell, by least
// squares, three times: many cells around the true pair have as many votes.
func (m *matcher) sharpen(shift, scale float64) (float64, float64) {
	for range 3 {
		var n, sd, sdd, sx, sdx float64
		for i := range m.tracks {
			t := &m.tracks[i]
			miss, at := math.Inf(1), 0.0
			for _, f := range m.features[t.frame] {
				if d := t.x - m.place(t.element, f.nm, scale) - shift; math.Abs(d) < math.Abs(miss) {
					miss, at = d, m.nominal.disperse(f.nm-m.nominal.L_c)
				}
			}
			if math.Abs(miss) <= matchPx {
				n, sd, sdd, sx, sdx = n+1, sd+at, sdd+at*at, sx+miss, sdx+at*miss
			}
		}
		det := n*sdd - sd*sd
		if !(det > 1e-9*n*sdd) {
			return shift, scale
		}
		shift, scale = shift+(sdd*sx-sd*sdx)/det, scale+(n*sdx-sd*sx)/det
	}
	return shift, scale
}

// differs tells whether a change of the pair moves half of the lines by more than
// apartPx: it then takes most peaks for other lines. A pair that only turns about the
// bulk of the lines is no rival; the fit judges its odd lines.
func (m *matcher) differs(shift, scale float64) bool {
	moved, n := 0, 0
	for _, list := range m.features {
		for _, f := range list {
			n++
			if math.Abs(shift+scale*m.nominal.disperse(f.nm-m.nominal.L_c)) > apartPx {
				moved++
			}
		}
	}
	return 2*moved > n
}

// listed is the mean number of features that a pair puts between the first and the
// last track seen: what is beyond may be beyond the detector.
func (m *matcher) listed(shift, scale float64) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for i := range m.tracks {
		low, high = min(low, m.tracks[i].x), max(high, m.tracks[i].x)
	}
	elements := map[int]int{}
	for i := range m.tracks {
		elements[m.tracks[i].frame] = m.tracks[i].element
	}
	n := 0
	for frame, element := range elements {
		for _, f := range m.features[frame] {
			if x := m.place(element, f.nm, scale) + shift; x >= low && x <= high {
				n++
			}
		}
	}
	return float64(n) / float64(m.frames)
}

// judge refuses a match that is not beyond doubt.
func (m *matcher) judge(r ArcMatch) error {
	fail := func(format string, args ...any) error {
		return &ArcError{What: fmt.Sprintf(format, args...), Match: r}
	}
	switch {
	case r.Score < leastLines:
		return fail("at best %.1f of the %.1f lines seen in a frame fit the lamp's list; %d are needed", r.Score, r.Found, leastLines)
	case r.Score < leastFraction*min(r.Found, r.Listed):
		return fail("at best %.1f of the %.1f lines seen in a frame fit the %.1f listed: is this the lamp, and this the instrument?", r.Score, r.Found, r.Listed)
	case r.Second > mostRivalry*r.Score:
		return fail("the lines are ambiguous: one match explains %.1f of them in a frame, another %.1f", r.Score, r.Second)
	case math.Abs(r.ShiftPx) > m.rule.ShiftPx || math.Abs(r.Scale) > m.rule.Scale:
		return fail("the best match lies at the end of the search, %.1f px and %.2f %% off nominal", r.ShiftPx, 100*r.Scale)
	}
	return nil
}
