package report

import (
	"math"
	"slices"
)

// lineSearch looks for wavelengths at which a part of the field is brighter than beside
// them: at each, a place's light is compared with its mean from nearReach to farReach planes
// away on both sides, in units of the noise. What all places have alike, as lines of the
// sky, is taken off as their median. The excess is the mean over the places of z|z|, each z
// cut at cutSigmas so that a single bad voxel does not make a line: 0 without lines, with a
// standard deviation of sqrt(3/n) (the fourth moment of a Gaussian is 3).
type lineSearch struct {
	planes           int
	signal, variance [][]float64 // of the last planes, a ring
	seen             int
	excess           []float64
	places           int
	z                []float64
}

const (
	nearReach, farReach = 4, 8
	window              = 2*farReach + 1
	leastBeside         = 4 // good voxels beside
	cutSigmas           = 20
	lineLimit           = 6 // standard deviations of the excess
)

func newLineSearch(planes int) *lineSearch {
	return &lineSearch{planes: planes, signal: make([][]float64, window), variance: make([][]float64, window), excess: make([]float64, planes)}
}

// add takes in the next plane.
func (s *lineSearch) add(signal, variance []float64) {
	at := s.seen % window
	s.signal[at] = append(s.signal[at][:0], signal...)
	s.variance[at] = append(s.variance[at][:0], variance...)
	s.seen++
	s.places = len(signal)
	if s.seen >= window {
		s.judge(s.seen - 1 - farReach)
	}
}

// judge finds the excess of plane l, whose neighbours are all there.
func (s *lineSearch) judge(l int) {
	s.z = s.z[:0]
	at := l % window
	for i, v := range s.signal[at] {
		sum, noise, n := 0.0, 0.0, 0
		for d := nearReach; d <= farReach; d++ {
			for _, k := range [2]int{(l + d) % window, (l - d) % window} {
				if x := s.signal[k][i]; !math.IsNaN(x) {
					sum += x
					noise += s.variance[k][i]
					n++
				}
			}
		}
		if math.IsNaN(v) || n < leastBeside {
			continue
		}
		k := float64(n)
		if sigma := math.Sqrt(s.variance[at][i] + noise/(k*k)); sigma > 0 {
			s.z = append(s.z, (v-sum/k)/sigma)
		}
	}
	if len(s.z) == 0 {
		return
	}
	slices.Sort(s.z)
	middle, sum := s.z[len(s.z)/2], 0.0
	for _, z := range s.z {
		z = min(max(z-middle, -cutSigmas), cutSigmas)
		sum += z * math.Abs(z)
	}
	s.excess[l] = sum / float64(len(s.z))
}

// finish gives the excess by plane and the limit above which it is a line.
func (s *lineSearch) finish() (excess []float64, limit float64) {
	return s.excess, lineLimit * math.Sqrt(3/float64(max(1, s.places)))
}

// peaks are the planes of the strongest lines, at most so many, the strongest first. A line
// shows in two neighbouring planes at least, and no two are nearer than farReach.
func peaks(excess []float64, limit float64, most int) []int {
	var all []int
	for l := 1; l+1 < len(excess); l++ {
		if excess[l] > limit && excess[l] >= excess[l-1] && excess[l] > excess[l+1] && max(excess[l-1], excess[l+1]) > limit/2 {
			all = append(all, l)
		}
	}
	slices.SortStableFunc(all, func(a, b int) int {
		switch {
		case excess[a] > excess[b]:
			return -1
		case excess[a] < excess[b]:
			return 1
		}
		return 0
	})
	var chosen []int
	for _, l := range all {
		if len(chosen) < most && !slices.ContainsFunc(chosen, func(k int) bool { return max(l-k, k-l) < farReach }) {
			chosen = append(chosen, l)
		}
	}
	return chosen
}

const (
	// The continuum of the sky is the median of so many planes about one; what stands out
	// of it by so many of its own scatters is a line.
	skyWindow = 41
	skySigmas = 8
)

// skyLines are the planes at which lines of the sky peak, in a spectrum of the sky.
func skyLines(sky []float64) []int {
	above := make([]float64, len(sky))
	for l := range sky {
		above[l] = sky[l] - median(sky[max(0, l-skyWindow/2):min(len(sky), l+skyWindow/2+1)])
	}
	var sizes []float64
	for _, a := range above {
		sizes = append(sizes, math.Abs(a))
	}
	limit := skySigmas * 1.4826 * median(sizes)
	var lines []int
	for l := 1; l+1 < len(above); l++ {
		if above[l] > limit && above[l] >= above[l-1] && above[l] > above[l+1] {
			lines = append(lines, l)
		}
	}
	return lines
}

// middles are the middles of stretches of true.
func middles(of []bool) []int {
	var all []int
	for l := 0; l < len(of); l++ {
		first := l
		for l < len(of) && of[l] {
			l++
		}
		if l > first {
			all = append(all, (first+l-1)/2)
		}
	}
	return all
}
