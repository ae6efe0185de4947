package reduce

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"mirrorloom/calib"
	"mirrorloom/pipeline/instrument"
)

// A list of stuck mirrors may be wrong. The coded flat shows it: where a mirror is dead,
// the light of its element dips along the slit by its share.

// stuckDoubt is a place where the flat disagrees with the list: so many mirrors' light
// more than the list says, or less if negative.
type stuckDoubt struct {
	element, w int
	mirrors    float64
}

const (
	// doubtMirrors is from how much of a mirror's light the list is doubted, doubtSigmas
	// from how many times the scatter of all places.
	doubtMirrors = 0.3
	doubtSigmas  = 8
	// mostDoubts are named.
	mostDoubts = 6
)

// doubtStuck warns of places where the flat disagrees with the list.
func (r *reduction) doubtStuck() {
	doubts := r.stuckDoubts()
	if len(doubts) == 0 {
		return
	}
	var words []string
	for _, d := range doubts[:min(len(doubts), mostDoubts)] {
		if d.mirrors < 0 {
			words = append(words, fmt.Sprintf("element %d lacks the light of %.1f mirrors more at w = %d", d.element, -d.mirrors, d.w))
		} else {
			words = append(words, fmt.Sprintf("element %d has the light of %.1f mirrors more at w = %d", d.element, d.mirrors, d.w))
		}
	}
	if n := len(doubts) - mostDoubts; n > 0 {
		words = append(words, fmt.Sprintf("and %d places besides", n))
	}
	r.warn("the coded flat disagrees with the profile's list of stuck mirrors (dmd.stuck_csv): %s; mend the list (w is the device's row, or row - column mounted diagonally, give or take one) or clean the slit", strings.Join(words, ", "))
}

// stuckDoubts fits each mirror row of each element for how much light it has beyond what
// the list says, and gives the places that stand out, the clearest of those that share
// light.
func (r *reduction) stuckDoubts() []stuckDoubt {
	p, response, n := r.seq.Profile, r.optics.response, r.seq.N()
	if response == nil || len(response.SlitRaw) == 0 {
		return nil
	}
	s := r.optics.stuck
	if s == nil { // a list of none
		s = sortElements(r.seq)
		s.measureGain()
	}
	lit := r.lit()
	var all []stuckDoubt
	first, last := p.WRange()
	for j := range s.elements {
		for w := first; w <= last; w++ {
			if mirrors, ok := s.surplus(response, lit, n, j, w); ok {
				all = append(all, stuckDoubt{j, w, mirrors})
			}
		}
	}
	return clearest(all, spreadReach(p)/math.Abs(p.Spectrograph.WStepPx))
}

// leastSeen is the part of a mirror row's light, squared, that must fall on rows fit to be
// compared: towards the slit's ends a row's share is not told from the ends.
const leastSeen = 0.7

// surplus is how many mirrors' light beyond what the list says the flat shows in mirror
// row w of element j of n; not ok where too little of it is seen.
func (s *stuckMirrors) surplus(response *calib.Response, lit []float32, n, j, w int) (mirrors float64, ok bool) {
	p := s.seq.Profile
	full := float32(calib.DefaultFlatRule().FullyLit)
	reach := spreadReach(p)
	var top, bottom, whole float64
	for y := int(math.Floor(s.row(w) - reach)); y <= int(math.Ceil(s.row(w)+reach)); y++ {
		share := calib.RowShare(float64(y)-s.row(w), p.Spectrograph.LSFFWHMPx)
		whole += share * share
		if y < 0 || y >= p.Detector.Rows {
			continue
		}
		at := y*n + j
		raw := float64(response.SlitRaw[at])
		if lit[at] < full || math.IsNaN(raw) || math.IsInf(raw, 0) || response.SlitFlags[at] != 0 {
			continue
		}
		top += share * (raw - float64(s.gain[at]))
		bottom += share * share
	}
	return top / bottom * s.mirrorsInRow(), bottom >= leastSeen*whole
}

// mirrorsInRow is how many mirrors' light of an element falls on a fully lit row of pixels.
func (s *stuckMirrors) mirrorsInRow() float64 {
	p := s.seq.Profile
	mirrors := float64(s.seq.ElementMirrors()) / math.Abs(p.Spectrograph.WStepPx)
	if p.DMD.Mounting == instrument.Diagonal { // every second u has a mirror in a row w
		mirrors /= 2
	}
	return mirrors
}

// clearest are the doubts that stand out of the scatter of all, none within reach of a
// clearer one of its element, in the order of elements.
func clearest(all []stuckDoubt, reach float64) []stuckDoubt {
	sizes := make([]float64, len(all))
	for i, d := range all {
		sizes[i] = math.Abs(d.mirrors)
	}
	slices.Sort(sizes)
	if len(sizes) == 0 {
		return nil
	}
	// The median of |x| is 0.6745 standard deviations of normal x.
	limit := max(doubtMirrors, doubtSigmas*sizes[len(sizes)/2]/0.6745)
	var found []stuckDoubt
	list := slices.DeleteFunc(slices.Clone(all), func(d stuckDoubt) bool { return math.Abs(d.mirrors) < limit })
	slices.SortStableFunc(list, func(a, b stuckDoubt) int {
		switch x, y := math.Abs(a.mirrors), math.Abs(b.mirrors); {
		case x > y:
			return -1
		case x < y:
			return 1
		}
		return 0
	})
	for _, d := range list {
		if !slices.ContainsFunc(found, func(f stuckDoubt) bool {
			return f.element == d.element && math.Abs(float64(f.w-d.w)) <= reach
		}) {
			found = append(found, d)
		}
	}
	slices.SortStableFunc(found, func(a, b stuckDoubt) int { return a.element - b.element })
	return found
}
