package hadamard

import (
	"errors"
	"fmt"
	"slices"
	"strings"
)

// MaxV is the largest code size: 4095 steps.
const MaxV = 4095

// Family names how a code arises; its text is what target files and headers
// carry.
type Family string

// The families. MSequence, Legendre and TwinPrime are S-matrices, half of whose columns
// are open. A Singer code opens about one in q of its v = (q^(d+1)-1)/(q-1) columns, q a
// prime power: with photon noise the sparser is the better.
//
// A family's complement opens what the family leaves closed: (v, v-k, v-2k+l). It has the
// same k-l and so almost the same read noise. Complements of S-matrices have (v-1)/2 open
// columns for (v+1)/2 and with photon noise alone are better by one part in v; those of
// Singer codes of q > 2 open most columns and are the worse wherever light has noise.
// Complements of less than 7 columns would be slit scans and are not among the sizes.
const (
	MSequence Family = "m-sequence" // v = 2^p - 1, p = 2..12
	Legendre  Family = "legendre"   // v prime, v = 3 mod 4, 3..4091
	TwinPrime Family = "twin-prime" // v = p(p+2), both prime: 15, 35, 143, 323, 899, 1763, 3599
	Singer    Family = "singer"     // v = (q^(d+1)-1)/(q-1), d >= 2: 7, 13, 15, 21, 31 ... 3783, 4095
	SlitScan  Family = "slit-scan"  // W = I, v = 1..4095

	MSequenceComplement Family = MSequence + complementSuffix
	LegendreComplement  Family = Legendre + complementSuffix
	TwinPrimeComplement Family = TwinPrime + complementSuffix
	SingerComplement    Family = Singer + complementSuffix
)

const (
	complementSuffix = "-complement"
	// minComplement: below it a complement opens one column at a time.
	minComplement = 7
)

// ErrUnknownFamily is returned, wrapped, for a name that is no family.
var ErrUnknownFamily = errors.New("unknown code family")

// Families lists the families in the order in which help texts show them.
func Families() []Family {
	return []Family{
		MSequence, Legendre, TwinPrime, Singer,
		MSequenceComplement, LegendreComplement, TwinPrimeComplement, SingerComplement, SlitScan,
	}
}

// Base is the family that f is the complement of, and true; f itself and false where it is
// no complement.
func (f Family) Base() (Family, bool) {
	base, is := strings.CutSuffix(string(f), complementSuffix)
	if is && slices.Contains(Families(), f) {
		return Family(base), true
	}
	return f, false
}

// ParseFamily turns a family's exact name into a Family, or returns an error
// wrapping ErrUnknownFamily that lists the names.
func ParseFamily(s string) (Family, error) {
	var names []string
	for _, f := range Families() {
		if s == string(f) {
			return f, nil
		}
		names = append(names, string(f))
	}
	return "", fmt.Errorf("%w %q: use one of %s", ErrUnknownFamily, s, strings.Join(names, ", "))
}

// Sizes lists the sizes v of a family in ascending order, to MaxV; nil for an
// unknown family.
func Sizes(f Family) []int {
	var sizes []int
	if base, is := f.Base(); is {
		for _, v := range Sizes(base) {
			if v >= minComplement {
				sizes = append(sizes, v)
			}
		}
		return sizes
	}
	switch f {
	case MSequence:
		for degree := minDegree; degree <= maxDegree; degree++ {
			sizes = append(sizes, 1<<degree-1)
		}
	case Legendre:
		for v := 3; v <= MaxV; v += 4 {
			if isPrime(v) {
				sizes = append(sizes, v)
			}
		}
	case TwinPrime:
		for p := 3; p*(p+2) <= MaxV; p += 2 {
			if isPrime(p) && isPrime(p+2) {
				sizes = append(sizes, p*(p+2))
			}
		}
	case Singer:
		for _, s := range singers() {
			sizes = append(sizes, s.v())
		}
	case SlitScan:
		for v := 1; v <= MaxV; v++ {
			sizes = append(sizes, v)
		}
	}
	return sizes
}

// NoCodeError says that a family has no code as asked. V is set when one size
// was asked for, Elements and Dark when the smallest code for a field was.
type NoCodeError struct {
	Family   Family
	V        int
	Elements int
	Dark     int // negative: the default number of dark columns
	Below    int // largest smaller size of the family, 0 if none
	Above    int // smallest larger size of the family, 0 if none
}

func (e *NoCodeError) Error() string {
	if e.V == 0 && e.Elements != 0 {
		dark := "the default dark columns"
		if e.Dark >= 0 {
			dark = fmt.Sprintf("%d dark columns", e.Dark)
		}
		return fmt.Sprintf("no %s code up to v = %d holds %d elements and %s: use wider elements or fewer dark columns",
			e.Family, MaxV, e.Elements, dark)
	}
	cure := ""
	switch {
	case e.Below != 0 && e.Above != 0:
		cure = fmt.Sprintf("the nearest are %d and %d", e.Below, e.Above)
	case e.Below != 0:
		cure = fmt.Sprintf("the largest is %d", e.Below)
	default:
		cure = fmt.Sprintf("the smallest is %d", e.Above)
	}
	return fmt.Sprintf("no %s code has v = %d: %s", e.Family, e.V, cure)
}

func noCode(f Family, v int) *NoCodeError {
	e := &NoCodeError{Family: f, V: v}
	for _, size := range Sizes(f) {
		if size < v {
			e.Below = size
		}
		if size > v {
			e.Above = size
			break
		}
	}
	return e
}
