package sequence

import (
	"fmt"
	"math/bits"
	"strings"
)

// The families of codes by their names in targets and headers. This package
// knows how a code's first row arises, to check a file's bits against what its
// header says, and nothing of its algebra: the rehearsal, which must share no
// algebra with the reduction, reads sequences too. A test holds these rows
// against those of package hadamard, for every family and size.
const (
	mSequence = "m-sequence"
	legendre  = "legendre"
	twinPrime = "twin-prime"
	singer    = "singer"
	slitScan  = "slit-scan"

	// complementSuffix after one of the others but the slit scan: open where that is
	// closed.
	complementSuffix = "-complement"
)

var families = [...]string{
	mSequence, legendre, twinPrime, singer,
	mSequence + complementSuffix, legendre + complementSuffix, twinPrime + complementSuffix, singer + complementSuffix,
	slitScan,
}

// baseFamily is the family that a known one is the complement of, or itself.
func baseFamily(family string) (base string, complement bool) {
	return strings.CutSuffix(family, complementSuffix)
}

// minComplement is the smallest complement: those of 3 columns would be slit scans.
const minComplement = 7

// maxV is the largest code size: 4095 steps.
const maxV = 4095

func isFamily(name string) bool {
	for _, f := range families {
		if f == name {
			return true
		}
	}
	return false
}

func familyList() string { return strings.Join(families[:], ", ") }

// hasSize tells whether a family has a code of v columns.
func hasSize(family string, v int) bool {
	if v < 1 || v > maxV {
		return false
	}
	base, complement := baseFamily(family)
	if complement && v < minComplement {
		return false
	}
	switch base {
	case mSequence:
		return v >= 3 && v&(v+1) == 0
	case legendre:
		return v%4 == 3 && isPrime(v)
	case twinPrime:
		_, ok := smallerTwin(v)
		return ok
	case singer:
		_, ok := singerFieldOf(v)
		return ok
	}
	return family == slitScan
}

// sizeAdvice says which sizes near v a family has.
func sizeAdvice(family string, v int) string {
	var near []string
	for below := min(v, maxV+1) - 1; below > 0; below-- {
		if hasSize(family, below) {
			near = append(near, fmt.Sprint(below))
			break
		}
	}
	for above := max(v, 0) + 1; above <= maxV; above++ {
		if hasSize(family, above) {
			near = append(near, fmt.Sprint(above))
			break
		}
	}
	return fmt.Sprintf("the family %s has no code of %d columns; the nearest sizes are %s", family, v, strings.Join(near, " and "))
}

func isPrime(v int) bool {
	for d := 2; d*d <= v; d++ {
		if v%d == 0 {
			return false
		}
	}
	return v > 1
}

// smallerTwin gives p of v = p(p+2), both prime and odd.
func smallerTwin(v int) (p int, ok bool) {
	for p = 3; p*(p+2) < v; p += 2 {
	}
	return p, p*(p+2) == v && isPrime(p) && isPrime(p+2)
}

// codeRows is a code as STEPS and CODE show it: row i is the first row shifted
// left by i, but for the slit scan, whose row i opens column i.
type codeRows struct {
	family  string
	v, k, l int
	first   []uint8
}

// newCodeRows makes the code of a family, of a size it has; poly is needed for an
// m-sequence, a Singer code and their complements and has to be 0 for the others.
func newCodeRows(family string, v int, poly uint32) (*codeRows, error) {
	base, complement := baseFamily(family)
	if base != mSequence && base != singer && poly != 0 {
		return nil, fault("CODEPOLY is %d where the family %s has no polynomial and 0 is due", poly, family)
	}
	c := &codeRows{family: family, v: v, k: (v + 1) / 2, l: (v + 1) / 4}
	switch base {
	case mSequence:
		if c.first = mSequenceRow(v, poly); c.first == nil {
			return nil, fault("CODEPOLY %d is no primitive polynomial of an m-sequence of %d columns", poly, v)
		}
	case singer:
		field, _ := singerFieldOf(v)
		if c.first = field.row(poly); c.first == nil {
			return nil, fault("CODEPOLY %d is no primitive polynomial of degree %d over GF(%d), as a Singer code of %d columns has", poly, field.degree, field.p, v)
		}
		c.k = (v - 1) / field.q
		c.l = (c.k - 1) / field.q
	case legendre:
		c.first = residueRow(v)
	case twinPrime:
		c.first = twinPrimeRow(v)
	case slitScan:
		c.first = make([]uint8, v)
		c.first[0] = 1
		c.k, c.l = 1, 0
	}
	if complement {
		for j := range c.first {
			c.first[j] = 1 - c.first[j]
		}
		c.k, c.l = v-c.k, v-2*c.k+c.l
	}
	return c, nil
}

// shows tells whether the v bits are row i of the code.
func (c *codeRows) shows(row []uint8, i int) bool {
	shift := i
	if c.family == slitScan {
		shift = c.v - i
	}
	for j, bit := range row {
		if bit != c.first[(j+shift)%c.v] {
			return false
		}
	}
	return true
}

// mSequenceRow is the sequence of period v = 2^p - 1 that starts with p-1 zeros
// and a one, s[i+p] being the exclusive or of s[i+t] over the lower exponents t
// of the polynomial (bit t of poly). It is nil if the polynomial has another
// degree or is not primitive, that is if the sequence has a shorter period.
func mSequenceRow(v int, poly uint32) []uint8 {
	degree := bits.Len(uint(v))
	if bits.Len32(poly) != degree+1 {
		return nil
	}
	taps := poly ^ 1<<degree
	row := make([]uint8, v)
	start := uint32(1) << (degree - 1) // bit t holds s[i+t]
	state := start
	for i := range row {
		if i > 0 && state == start {
			return nil
		}
		row[i] = uint8(state & 1)
		next := uint32(bits.OnesCount32(state&taps)) & 1
		state = state>>1 | next<<(degree-1)
	}
	if state != start {
		return nil
	}
	return row
}

// residueRow has ones at the squares mod a prime v, 0 among them.
func residueRow(v int) []uint8 {
	row := make([]uint8, v)
	for i := range v {
		row[i*i%v] = 1
	}
	return row
}

// twinPrimeRow is the complement of the twin-prime difference set of v = p(p+2):
// the multiples of p+2, and the units that are squares mod both primes or mod
// neither (Stanton and Sprott 1958, Canad. J. Math. 10, 73).
func twinPrimeRow(v int) []uint8 {
	p, _ := smallerTwin(v)
	q := p + 2
	modP, modQ := residueRow(p), residueRow(q)
	row := make([]uint8, v)
	for i := range row {
		unit := i%p != 0 && i%q != 0
		inSet := i%q == 0 || unit && modP[i%p] == modQ[i%q]
		if !inSet {
			row[i] = 1
		}
	}
	return row
}
