package calib

import (
	"math"
	"slices"
)

// edgeSearch is EdgeRule.Find at work. S, medians and fine structure are taken only
// where they can matter, which is in few pixels: the noise is never below that of
// the readout, so most Laplacians are too small whatever the light.
type edgeSearch struct {
	EdgeRule
	width, rows int
	noise       FrameNoise
	image       []float32 // NaN where nothing is known; struck pixels filled
	edge        []float32 // S where it is known, else unknownEdge
	marks       []edgeMark
	found       []int     // struck pixels, in the order of finding
	near, fine  []float32 // scratch of medians
}

type edgeMark uint8

const (
	struck edgeMark = 1 << iota
	due             // to be judged in this pass
)

// unknownEdge: S is at least 0, or NaN.
const unknownEdge = -1

// fineFloor is the least fine structure, in units of the noise, so that a flat
// frame has a contrast (the paper's accompanying script).
const fineFloor = 0.01

func newEdgeSearch(rule EdgeRule, block []float32, width int, noise FrameNoise, flags []Flag) *edgeSearch {
	s := &edgeSearch{
		EdgeRule: rule, width: width, rows: len(block) / width, noise: noise,
		image: slices.Clone(block), edge: make([]float32, len(block)), marks: make([]edgeMark, len(block)),
		near: make([]float32, 0, 25), fine: make([]float32, 0, 49),
	}
	for i := range s.image {
		s.edge[i], s.marks[i] = unknownEdge, due
		if flags[i]&edgeAvoid != 0 {
			s.image[i] = float32(math.NaN())
		}
	}
	return s
}

func (s *edgeSearch) run() []Strike {
	for range s.Iterations {
		fresh := s.grow(s.grow(s.seeds(), s.Sigmas), s.Fraction*s.Sigmas)
		if len(fresh) == 0 {
			break
		}
		for _, i := range fresh {
			s.marks[i] |= struck
		}
		s.found = append(s.found, fresh...)
		s.fill()
	}
	slices.Sort(s.found)
	list := make([]Strike, len(s.found))
	for k, i := range s.found {
		list[k] = Strike{i, s.image[i]}
	}
	return list
}

// seeds are the pixels that are due and struck by themselves, in order. None is due
// afterwards.
func (s *edgeSearch) seeds() []int {
	var list []int
	for i, m := range s.marks {
		if m&due == 0 {
			continue
		}
		s.marks[i] &^= due
		if m&struck == 0 && s.isSeed(i) {
			list = append(list, i)
		}
	}
	return list
}

// isSeed asks the cheapest question first.
func (s *edgeSearch) isSeed(i int) bool {
	l := s.laplacian(i)
	if !s.mayExceed(i, l) || !(float64(s.edgeAt(i)) > s.Sigmas) {
		return false
	}
	excess := s.excess(i)
	if !(excess > s.Sigmas) {
		return false
	}
	sigma := l / float64(s.edge[i])
	return excess > s.Contrast*max(s.fineStructure(i)/sigma, fineFloor)
}

// mayExceed tells whether S may exceed Sigmas for the Laplacian l, without a median:
// where most of the 25 pixels hold so much light that N is too large, it does not.
func (s *edgeSearch) mayExceed(i int, l float64) bool {
	const rounding = 1 + 1e-6 // of S to float32, and of what is done here
	square := l * l / (s.Sigmas * s.Sigmas) * rounding
	read := float64(s.noise.Read[i])
	if !(l > 0 && square > read) {
		return false
	}
	limit := float32(math.Inf(1))
	if s.noise.Photon > 0 {
		limit = float32((square - read) / s.noise.Photon * rounding)
	}
	x, y := i%s.width, i/s.width
	x0, x1 := max(x-fillReach, 0), min(x+fillReach, s.width-1)
	const most = (2*fillReach+1)*(2*fillReach+1)/2 + 1
	bright := 0
	for v := max(y-fillReach, 0); v <= min(y+fillReach, s.rows-1); v++ {
		for _, p := range s.image[v*s.width+x0 : v*s.width+x1+1] {
			if p >= limit {
				bright++
			}
		}
		if bright >= most {
			return false
		}
	}
	return true
}

// grow adds to the pixels of a list, kept in order, their neighbours whose S'
// exceeds a limit and which are not struck.
func (s *edgeSearch) grow(list []int, limit float64) []int {
	all := slices.Clone(list)
	seen := make(map[int]bool, 9*len(list))
	for _, i := range list {
		seen[i] = true
	}
	for _, i := range list {
		s.around(i, 1, func(j int) {
			if seen[j] {
				return
			}
			seen[j] = true
			if s.marks[j]&struck == 0 && float64(s.edgeAt(j)) > limit && s.excess(j) > limit {
				all = append(all, j)
			}
		})
	}
	return all
}

// fill replaces struck pixels from those around, and has everything judged anew that
// a changed pixel reaches.
func (s *edgeSearch) fill() {
	values := make([]float32, len(s.found))
	for k, i := range s.found {
		s.near = s.near[:0]
		s.around(i, fillReach, func(j int) {
			if s.marks[j]&struck == 0 {
				s.near = append(s.near, s.image[j])
			}
		})
		values[k] = medianOrNaN(s.near)
	}
	for k, i := range s.found {
		if values[k] == s.image[i] {
			continue
		}
		s.image[i] = values[k]
		s.around(i, fillReach, func(j int) { s.edge[j] = unknownEdge })
		s.around(i, edgeReach, func(j int) { s.marks[j] |= due })
	}
}

// around calls f for the pixels of the frame within reach of pixel i along both axes,
// itself included, in order.
func (s *edgeSearch) around(i, reach int, f func(j int)) {
	x, y := i%s.width, i/s.width
	x0, x1 := max(x-reach, 0), min(x+reach, s.width-1)
	for v := max(y-reach, 0); v <= min(y+reach, s.rows-1); v++ {
		for j := v*s.width + x0; j <= v*s.width+x1; j++ {
			f(j)
		}
	}
}

// laplacian is that of a pixel, electrons; NaN where the pixel is.
func (s *edgeSearch) laplacian(i int) float64 {
	p := float64(s.image[i])
	x, y := i%s.width, i/s.width
	left, right := s.pair(p, i, 1, x > 0, x < s.width-1)
	below, above := s.pair(p, i, s.width, y > 0, y < s.rows-1)
	corner := func(h, v float64) float64 { return max(0, p-(h+v)/2) }
	return (corner(left, below) + corner(left, above) + corner(right, below) + corner(right, above)) / 4
}

// pair is the values at i-step and i+step. A missing one lies on the line through p
// and the other, as the end of what is known is no edge of the light, but not below p,
// which would make p a hit where the other is one. Both missing are p.
func (s *edgeSearch) pair(p float64, i, step int, hasBefore, hasAfter bool) (before, after float64) {
	before, after = math.NaN(), math.NaN()
	if hasBefore {
		before = float64(s.image[i-step])
	}
	if hasAfter {
		after = float64(s.image[i+step])
	}
	switch noBefore, noAfter := before != before, after != after; {
	case noBefore && noAfter:
		return p, p
	case noBefore:
		before = max(p, 2*p-after)
	case noAfter:
		after = max(p, 2*p-before)
	}
	return before, after
}

// edgeAt is S.
func (s *edgeSearch) edgeAt(i int) float32 {
	if s.edge[i] != unknownEdge {
		return s.edge[i]
	}
	l := s.laplacian(i)
	if l > 0 {
		s.near = s.near[:0]
		s.around(i, fillReach, func(j int) { s.near = append(s.near, s.image[j]) })
		light := max(0, float64(medianOrNaN(s.near)))
		l /= math.Sqrt(float64(s.noise.Read[i]) + s.noise.Photon*light)
	}
	s.edge[i] = float32(l)
	return s.edge[i]
}

// excess is S'.
func (s *edgeSearch) excess(i int) float64 {
	list := make([]float32, 0, 25)
	s.around(i, fillReach, func(j int) { list = append(list, s.edgeAt(j)) })
	return float64(s.edge[i] - medianOrNaN(list))
}

// fineStructure is F, electrons.
func (s *edgeSearch) fineStructure(i int) float64 {
	s.fine = s.fine[:0]
	s.around(i, 3, func(j int) { s.fine = append(s.fine, s.median3(j)) })
	f := s.median3(i) - medianOrNaN(s.fine)
	part, reach := 0.25, 1
	if s.known(i) < (2*fillReach+1)*(2*fillReach+1) {
		part, reach = 1, fillReach
	}
	low, high := float32(math.Inf(1)), float32(math.Inf(-1))
	s.around(i, reach, func(j int) {
		if m := s.median3(j); m == m {
			low, high = min(low, m), max(high, m)
		}
	})
	return max(float64(f), part*float64(high-low))
}

// known counts the pixels of a median of 5 x 5.
func (s *edgeSearch) known(i int) (n int) {
	s.around(i, fillReach, func(j int) {
		if s.image[j] == s.image[j] {
			n++
		}
	})
	return n
}

// median3 is M3; NaN where nothing around is known.
func (s *edgeSearch) median3(i int) float32 {
	s.near = s.near[:0]
	s.around(i, 1, func(j int) { s.near = append(s.near, s.image[j]) })
	return medianOrNaN(s.near)
}
