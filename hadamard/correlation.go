package hadamard

import (
	"errors"
	"fmt"
	"math"
	"math/bits"
)

// ErrNoRedundancy is returned, wrapped, when dark columns are asked of a slit
// scan: a strip that is never opened costs an exposure and checks nothing.
var ErrNoRedundancy = errors.New("a slit scan has no dark columns")

// DarkCorrelation is the largest |correlation| of two columns of Ag, the g x v
// matrix of the dark rows of A: the normalised inner product
//
//	|sum_j A_ji A_ji'| / sqrt(sum_j A_ji^2 sum_j A_ji'^2),  j over the dark columns,
//
// maximised over the steps i != i'. Column i of Ag is the mark that an error in
// step i leaves in the dark decodes, so at 1 two steps cannot be told apart.
// (No mean is subtracted: this is the coherence that bounds matching pursuit,
// Tropp 2004, IEEE Trans. Inf. Theory 50, 2231.) It is not below Welch's bound,
// sqrt((v-g)/(g(v-1))). A set of none or one tells no steps apart: 1.
//
// columns may come in any order. Errors: a column outside 0..v-1 or twice;
// ErrNoRedundancy for the slit scan.
func DarkCorrelation(c *Code, columns []int) (float64, error) {
	if c.family == SlitScan {
		return 0, fmt.Errorf("%w: leave the dark set empty", ErrNoRedundancy)
	}
	sorted, err := sortedIndices("dark column", columns, c.v)
	if err != nil {
		return 0, err
	}
	if len(sorted) < 2 {
		return 1, nil
	}
	return newScorer(c, len(sorted)).score(sorted, math.Inf(1)), nil
}

// scorer computes DarkCorrelation of sets of one size. It stops early, with a
// value not below limit, once it knows that the result is not below limit.
type scorer interface {
	score(columns []int, limit float64) float64
}

func newScorer(c *Code, g int) scorer {
	if c.family == MSequence {
		return newSpectrumScorer(c)
	}
	return newBitScorer(c, g)
}

// spectrumScorer serves m-sequences: the elementwise product of two columns of
// 1-2W is again one, so the correlations are v numbers, the +-1 transform of
// the set's indicator over g.
type spectrumScorer struct {
	index []int   // columnIndex
	work  []int32 // v+1
}

func newSpectrumScorer(c *Code) *spectrumScorer {
	return &spectrumScorer{index: columnIndex(degreeOf(c.v)), work: make([]int32, c.v+1)}
}

func (s *spectrumScorer) score(columns []int, _ float64) float64 {
	clear(s.work)
	for _, j := range columns {
		s.work[s.index[j]] = 1
	}
	transformInts(s.work)
	largest := int32(0)
	for _, x := range s.work[1:] {
		largest = max(largest, x, -x)
	}
	return float64(largest) / float64(len(columns))
}

// transformInts is the Walsh-Hadamard transform in place; len(x) = 2^p.
func transformInts(x []int32) {
	for h := 1; h < len(x); h *= 2 {
		for i := 0; i < len(x); i += 2 * h {
			low, high := x[i:i+h], x[i+h:i+2*h]
			high = high[:len(low)]
			for j, a := range low {
				b := high[j]
				low[j], high[j] = a+b, a-b
			}
		}
	}
}

// bitScorer serves any cyclic code. Step i is the string of its bits in the g
// dark columns; from the ones n_i of each and n_ii' of both, a pair's inner
// product is a^2 n_ii' + a b (n_i + n_i' - 2 n_ii') + b^2 (g - n_i - n_i' + n_ii').
type bitScorer struct {
	code  *Code
	g     int
	words int
	bits  []uint64 // words a step
	ones  []int    // n_i
}

func newBitScorer(c *Code, g int) *bitScorer {
	words := (g + 63) / 64
	return &bitScorer{code: c, g: g, words: words, bits: make([]uint64, words*c.v), ones: make([]int, c.v)}
}

func (s *bitScorer) score(columns []int, limit float64) float64 {
	s.collect(columns)
	if s.code.Design().IsS() {
		return s.scoreS(limit)
	}
	return s.scoreAny(limit)
}

func (s *bitScorer) collect(columns []int) {
	clear(s.bits)
	clear(s.ones)
	for n, j := range columns {
		for i := range s.code.v {
			bit := s.code.first[(i+j)%s.code.v]
			s.bits[i*s.words+n/64] |= uint64(bit) << (n % 64)
			s.ones[i] += int(bit)
		}
	}
}

// scoreS: entries of A are +-2/(v+1), a pair correlates by agreements less
// disagreements.
func (s *bitScorer) scoreS(limit float64) float64 {
	largest, stop := 0, s.g+1
	if l := limit * float64(s.g); l <= float64(s.g) {
		stop = int(math.Ceil(l))
	}
	for i := 1; i < s.code.v && largest < stop; i++ {
		least, most := extremes(s.step(i), s.bits[:i*s.words])
		largest = max(largest, s.g-2*least, 2*most-s.g)
	}
	return float64(largest) / float64(s.g)
}

// extremes gives the least and the most bits in which mine differs from any of
// the strings of as many words in others. One and two words, up to 128 dark
// columns, have loops of their own: this is where the search spends its time.
func extremes(mine, others []uint64) (least, most int) {
	least = 64 * len(mine)
	switch len(mine) {
	case 1:
		x := mine[0]
		for _, y := range others {
			n := bits.OnesCount64(x ^ y)
			least, most = min(least, n), max(most, n)
		}
	case 2:
		x0, x1 := mine[0], mine[1]
		for ; len(others) >= 2; others = others[2:] {
			n := bits.OnesCount64(x0^others[0]) + bits.OnesCount64(x1^others[1])
			least, most = min(least, n), max(most, n)
		}
	default:
		for ; len(others) >= len(mine); others = others[len(mine):] {
			n := 0
			for w, x := range mine {
				n += bits.OnesCount64(x ^ others[w])
			}
			least, most = min(least, n), max(most, n)
		}
	}
	return least, most
}

func (s *bitScorer) scoreAny(limit float64) float64 {
	a, b := s.code.InverseEntries()
	norm := func(i int) float64 {
		return math.Sqrt(a*a*float64(s.ones[i]) + b*b*float64(s.g-s.ones[i]))
	}
	largest := 0.0
	for i := 0; i < s.code.v && largest < limit; i++ {
		mine := s.step(i)
		for other := range i {
			both := 0
			for w, x := range s.step(other) {
				both += bits.OnesCount64(x & mine[w])
			}
			either := s.ones[i] + s.ones[other] - both
			inner := a*a*float64(both) + a*b*float64(either-both) + b*b*float64(s.g-either)
			largest = max(largest, math.Abs(inner)/(norm(i)*norm(other)))
		}
	}
	return largest
}

func (s *bitScorer) step(i int) []uint64 { return s.bits[i*s.words : (i+1)*s.words] }
