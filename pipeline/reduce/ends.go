package reduce

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// maxEnds bounds the ends of one element: more closed ranges than this are not
// looked at.
const maxEnds = 64

// litMirrorRows tells for each mirror row w, from the first on, whether the
// element is lit there in a lamp frame: it has mirrors and they are not closed.
func litMirrorRows(seq *sequence.Sequence, strip sequence.Element) (lit []bool, first int) {
	first, last := seq.Profile.WRange()
	lit = make([]bool, last-first+1)
	for i := range lit {
		lit[i] = rowFlags(seq, seq.Profile, first+i, strip) == 0
	}
	return lit, first
}

// ends lists where the light of an element ends along the slit.
func (r *reduction) ends(element int) []calib.RowEnd {
	p := r.seq.Profile
	lit, first := litMirrorRows(r.seq, r.seq.Elements[r.seq.ElementColumns()[element]])
	var ends []calib.RowEnd
	at := func(w float64) float64 { return mirrorCenter(p, w) }
	for i := range len(lit) + 1 {
		before, here := i > 0 && lit[i-1], i < len(lit) && lit[i]
		if before != here && len(ends) < maxEnds {
			ends = append(ends, calib.RowEnd{Row: at(float64(first+i) - 0.5), Above: here == (p.Spectrograph.WStepPx > 0)})
		}
	}
	return ends
}

// mirrorCenter is the detector row of mirror row w at x = x_c.
func mirrorCenter(p *instrument.Profile, w float64) float64 {
	return p.Spectrograph.YCenterPx + p.Spectrograph.WStepPx*(w-p.WCenter())
}

// commonEnds are the ends of all elements, if they are the same.
func (r *reduction) commonEnds() (ends []calib.RowEnd, same bool) {
	for j := range r.seq.N() {
		own := r.ends(j)
		if j == 0 {
			ends = own
			continue
		}
		if len(own) != len(ends) {
			return nil, false
		}
		for i := range own {
			if own[i] != ends[i] {
				return nil, false
			}
		}
	}
	return ends, len(ends) > 0
}

// litRows are the detector rows, inclusive, from an element's first lit stretch to
// its last. None (first > last) for an element that is closed.
func (r *reduction) litRows(element int) (first, last int) {
	stretches := r.litStretches(element)
	if len(stretches) == 0 {
		return 0, -1
	}
	return stretches[0][0], stretches[len(stretches)-1][1]
}

// litStretches are the ranges of detector rows, inclusive, that an element lights
// whatever the column: the trace's excursion is left out. Closed rows part them.
func (r *reduction) litStretches(element int) [][2]int {
	down, up := 0.0, 0.0
	for x := range r.camera.Columns {
		t := r.optics.geometry.TraceShift(float64(x))
		down, up = min(down, t), max(up, t)
	}
	ends := r.ends(element) // they come in pairs, in order of w
	var all [][2]int
	for i := 0; i+1 < len(ends); i += 2 {
		low, high := min(ends[i].Row, ends[i+1].Row), max(ends[i].Row, ends[i+1].Row)
		first, last := max(0, int(math.Ceil(low+up))), min(r.camera.Rows-1, int(math.Floor(high+down)))
		if first <= last {
			all = append(all, [2]int{first, last})
		}
	}
	return all
}

// lit is the share of full light that reaches each detector row of each element,
// [row][element].
func (r *reduction) lit() []float32 {
	p, n := r.seq.Profile, r.seq.N()
	all := make([]float32, r.camera.Rows*n)
	share := make([]float64, r.camera.Rows)
	for j, column := range r.seq.ElementColumns() {
		mirrors, first := litMirrorRows(r.seq, r.seq.Elements[column])
		var centers []float64
		for i, on := range mirrors {
			if on {
				centers = append(centers, mirrorCenter(p, float64(first+i)))
			}
		}
		calib.Illumination(share, centers, math.Abs(p.Spectrograph.WStepPx), p.Spectrograph.LSFFWHMPx)
		for y, v := range share {
			all[y*n+j] = float32(v)
		}
	}
	return all
}
