package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// stuckMirrors is what mirrors that do not move do to a night; nil where all move. With
// parts o of an element's mirrors in a row stuck on and d stuck off, its light there
// follows o + (1-o-d) W in the place of the code W: decoding gives it (1-o-d) of its
// light. The constant is in all frames alike and decodes to nothing once it is taken off,
// as all-off frames show it or as pedestal.
type stuckMirrors struct {
	seq *sequence.Sequence
	// offset is how far mirror rows land from where the profile has them, px.
	offset   float64
	elements []stuckElement // by j
	// gain is the part of each element's light that is left in each detector row at x_c,
	// [row][element], if all its mirrors there get the same.
	gain []float32
	// shines, by detector row, tells whether the light of mirrors stuck on lands there.
	shines []bool
}

// stuckElement is an element with the mirrors that it lacks.
type stuckElement struct {
	sequence.Element
	missing []sequence.PlacedMirror
}

// spreadSigmas is how far from its mirror row light is looked for: 6e-5 of it lies
// beyond.
const spreadSigmas = 4

// spreadReach is the same in detector rows.
func spreadReach(p *instrument.Profile) float64 {
	return spreadSigmas*p.Spectrograph.LSFFWHMPx/fwhmPerSigma + 0.5
}

// fwhmPerSigma of a Gaussian, 2 sqrt(2 ln 2).
const fwhmPerSigma = 2.354820045030949

// newStuckMirrors sorts the mirrors. Those that the code does not govern lack nowhere;
// such as are stuck on shine all the same.
func newStuckMirrors(seq *sequence.Sequence, trace func(x float64) float64, offset float64) *stuckMirrors {
	placed := seq.StuckMirrors()
	if len(placed) == 0 {
		return nil
	}
	s := sortElements(seq)
	s.offset = offset
	for _, m := range placed {
		if m.On {
			s.shine(m.W, trace)
		}
		if m.Coded() {
			e := &s.elements[m.Element]
			e.missing = append(e.missing, m)
		}
	}
	s.measureGain()
	return s
}

// sortElements begins with no mirror stuck.
func sortElements(seq *sequence.Sequence) *stuckMirrors {
	s := &stuckMirrors{seq: seq, shines: make([]bool, seq.Profile.Detector.Rows)}
	for _, column := range seq.ElementColumns() {
		s.elements = append(s.elements, stuckElement{Element: seq.Elements[column]})
	}
	return s
}

// placeStuck finds the light of mirrors that do not move where the optics, as far as they
// are known, put it.
func (r *reduction) placeStuck() {
	offset := 0.0
	// The ends of the slit tell it to a few hundredths of a pixel, or not at all.
	if t := r.optics.trace; t != nil && math.Abs(t.OffsetPx) > 3*t.OffsetErr {
		offset = t.OffsetPx
	}
	r.optics.stuck = newStuckMirrors(r.seq, r.optics.geometry.TraceShift, offset)
}

// row is where a mirror row lands on the detector at x_c.
func (s *stuckMirrors) row(w int) float64 {
	return mirrorCenter(s.seq.Profile, float64(w)) + s.offset
}

// shine marks the detector rows that a mirror row reaches in some column.
func (s *stuckMirrors) shine(w int, trace func(x float64) float64) {
	p := s.seq.Profile
	low, high := traceBounds(p.Detector.Columns, trace)
	row, reach := s.row(w), spreadReach(p)
	for y := range s.shines {
		if float64(y) >= row+low-reach && float64(y) <= row+high+reach {
			s.shines[y] = true
		}
	}
}

// traceBounds are the least and the largest shift of a trace.
func traceBounds(columns int, trace func(x float64) float64) (low, high float64) {
	for x := range columns {
		t := trace(float64(x))
		low, high = min(low, t), max(high, t)
	}
	return low, high
}

// count is how many mirrors an element has in a mirror row, and how many of them follow
// the code; 0 in rows that do not.
func (s *stuckMirrors) count(e *stuckElement, w int) (all, working int) {
	if s.useless(e, w) {
		return 0, 0
	}
	for u := e.First; u <= e.Last; u++ {
		if _, _, ok := mirrorAt(s.seq.Profile, u, w); ok {
			all++
		}
	}
	working = all
	for _, m := range e.missing {
		if m.W == w {
			working--
		}
	}
	return all, working
}

// useless tells whether a mirror row of an element shows no light of the code.
func (s *stuckMirrors) useless(e *stuckElement, w int) bool {
	return slices.ContainsFunc(s.seq.Rows, func(r sequence.RowRange) bool {
		if w < r.First || w > r.Last {
			return false
		}
		return r.Use == sequence.UseSentinel || r.Use == sequence.UseClosed && (r.Element < 0 || r.Element == e.Element.Element)
	})
}

// mirrorAt is the mirror at a place, if there is one.
func mirrorAt(p *instrument.Profile, u, w int) (column, row int, ok bool) {
	column, row = u, w
	if p.DMD.Mounting == instrument.Diagonal {
		if (u+w)&1 != 0 {
			return 0, 0, false
		}
		column, row = (u-w)/2, (u+w)/2
	}
	return column, row, column >= 0 && column < p.DMD.Columns && row >= 0 && row < p.DMD.Rows
}

// reaching are the mirror rows, inclusive, whose light reaches rows first..last of a
// trace.
func (s *stuckMirrors) reaching(first, last float64) (wFirst, wLast int) {
	p := s.seq.Profile
	reach, zero := spreadReach(p), p.Spectrograph.YCenterPx+s.offset
	a := p.WCenter() + (first-reach-zero)/p.Spectrograph.WStepPx
	b := p.WCenter() + (last+reach-zero)/p.Spectrograph.WStepPx
	low, high := p.WRange()
	return max(low, int(math.Ceil(min(a, b)))), min(high, int(math.Floor(max(a, b))))
}

func (s *stuckMirrors) measureGain() {
	p := s.seq.Profile
	rows, n := p.Detector.Rows, len(s.elements)
	s.gain = make([]float32, rows*n)
	for j := range s.elements {
		e := &s.elements[j]
		for y := range rows {
			s.gain[y*n+j] = 1
			if len(e.missing) == 0 {
				continue
			}
			var all, working float64
			first, last := s.reaching(float64(y), float64(y))
			for w := first; w <= last; w++ {
				share := calib.RowShare(float64(y)-s.row(w), p.Spectrograph.LSFFWHMPx)
				a, b := s.count(e, w)
				all += share * float64(a)
				working += share * float64(b)
			}
			if all > 0 {
				s.gain[y*n+j] = float32(working / all)
			}
		}
	}
}

// lampLit is lit, and nothing in rows of an element that lack light of mirrors which do not
// move: the slit function goes on smoothly there, as if they had it.
func (r *reduction) lampLit() []float32 {
	all := r.lit()
	if s := r.optics.stuck; s != nil {
		for i, g := range s.gain {
			if g < unaffected {
				all[i] = 0
			}
		}
	}
	return all
}

// gainAt is the gain at an index [row][element].
func (s *stuckMirrors) gainAt(at int) float64 {
	if s == nil {
		return 1
	}
	return float64(s.gain[at])
}

// unaffected is the gain from which a row is taken to have all its light.
const unaffected = 0.999

// leastGain: where more than half of an element's light is missing, what is put in its
// place rests on its neighbours more than on itself.
const leastGain = 0.5

// low are the flags of voxels whose light is missing for the most part, [row][element].
func (s *stuckMirrors) low() []calib.Flag {
	if s == nil {
		return nil
	}
	flags := make([]calib.Flag, len(s.gain))
	for i, g := range s.gain {
		if g < leastGain {
			flags[i] = product.FlagLowFlat
		}
	}
	return flags
}

// shinesOn tells whether the light of mirrors stuck on lands on a detector row.
func (s *stuckMirrors) shinesOn(y int) bool { return s != nil && s.shines[y] }

// anyOn tells whether light of mirrors stuck on lands anywhere.
func (s *stuckMirrors) anyOn() bool { return s != nil && slices.Contains(s.shines, true) }

// leastQuiet rows in a stretch are too few to look for lines in.
const leastQuiet = 3

// quiet are the parts of stretches of detector rows, inclusive, on which no mirror stuck
// on shines; all of them where that would leave less than half of the rows: then the few
// that are wrong have to stand out by themselves.
func (s *stuckMirrors) quiet(stretches [][2]int) [][2]int {
	if s == nil {
		return stretches
	}
	var parts [][2]int
	all, left := 0, 0
	for _, rows := range stretches {
		all += rows[1] - rows[0] + 1
		for y := rows[0]; y <= rows[1]; y++ {
			first := y
			for y <= rows[1] && !s.shines[y] {
				y++
			}
			if y-first >= leastQuiet {
				parts = append(parts, [2]int{first, y - 1})
				left += y - first
			}
		}
	}
	if 2*left < all {
		return stretches
	}
	return parts
}
