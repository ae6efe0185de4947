package audit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// FalseAlarm is the chance by which a night of frames that are right has one that the
// frame test calls wrong.
const FalseAlarm = 1e-4

// threshold is the largest chi-square of a frame over what noise gives it, at which a
// night of so many frames is called right: of `pixels` degrees of freedom each, the
// largest of the frames exceeds it with the chance alpha (each with alpha/frames).
// The quantile is that of Wilson and Hilferty 1931, Proc. Natl. Acad. Sci. 17, 684,
// good to 1e-4 for the hundreds of pixels and more that a sample has.
func threshold(alpha float64, frames, pixels int) float64 {
	if pixels < 1 {
		return math.Inf(1)
	}
	z := distuv.UnitNormal.Quantile(1 - alpha/float64(max(frames, 1)))
	w := 2 / (9 * float64(pixels))
	return math.Pow(1-w+z*math.Sqrt(w), 3)
}

// outlying is how far a frame must lie beyond the others where they all have errors
// that noise does not explain (seeing, guiding, neighbours): in their median excess.
// Such errors grow with the square of a normal number, whose median is 0.45: beyond
// 100 medians lies one in 10^11.
const outlying = 100

// frameTests gives for each row the chi-square that goes if it is erased, over what
// noise gives: 1 for a frame that is right. 0 for rows without a test.
func (s *state) frameTests() []float64 {
	ratio := make([]float64, s.v)
	pg := s.lit()
	for k := range s.v {
		p := s.projector.RawRowView(k)
		if s.erased[k] || p[k] < leastSeen {
			continue
		}
		noise := 0.0
		for i, x := range p {
			noise += x * x * s.noise[i]
		}
		ratio[k] = dot(pg.RawRowView(k), p) / noise
	}
	return ratio
}

// suspects gives the rows whose frames the test calls wrong, the worst first. common is
// the excess that errors of the model leave in every frame.
func (s *state) suspects(alpha, common float64) []int {
	ratio := s.frameTests()
	tested := 0
	for _, r := range ratio {
		if r > 0 {
			tested++
		}
	}
	limit := threshold(alpha, tested, s.pixels)
	limit = max(limit, 1+outlying*common/float64(s.pixels))
	var rows []int
	for k, r := range ratio {
		if r > limit && s.everywhere(k, (limit-1)/2) {
			rows = append(rows, k)
		}
	}
	slices.SortStableFunc(rows, func(a, b int) int {
		if ratio[a] > ratio[b] {
			return -1
		}
		if ratio[a] < ratio[b] {
			return 1
		}
		return a - b
	})
	return rows
}

// parts is the number of parts that a sample is divided into.
const parts = 4

// everywhere tells whether a row's excess is above limit in all parts of the sample but
// one: a wrong mask shows all over the detector, a hit that was not found in one place.
func (s *state) everywhere(k int, limit float64) bool {
	p := s.projector.RawRowView(k)
	out := 0
	for _, part := range s.Parts {
		sum, noise := part.Sum(), part.Noise()
		var delta, expected float64
		for i, x := range p {
			if x == 0 || s.from[i] == none {
				continue
			}
			x *= s.factor[i]
			expected += x * x * noise[s.from[i]]
			for j, y := range p {
				if y != 0 && s.from[j] != none {
					delta += x * y * s.factor[j] * sum.At(s.from[i], s.from[j])
				}
			}
		}
		if delta <= (1+limit)*expected {
			out++
		}
	}
	return out <= len(s.Parts)/parts
}

func sumOf(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v
	}
	return sum
}

func geometric(a, b float64) float64 { return math.Sqrt(a * b) }
