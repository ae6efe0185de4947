package sequence

import (
	"mirrorloom/pipeline/instrument"
)

// Kind is what a step is taken for.
type Kind string

// The kinds of steps. Flat and Arc are lamp frames whatever their mask (a lamp
// frame with all mirrors off is a Flat); AllOn and AllOff look at the sky.
const (
	Bias    Kind = "bias"
	Dark    Kind = "dark"
	Flat    Kind = "flat"
	Arc     Kind = "arc"
	AllOn   Kind = "all-on"
	AllOff  Kind = "all-off"
	Science Kind = "science"
	RefStar Kind = "refstar"
)

// Kinds lists every kind in the order in which tables print them.
func Kinds() []Kind {
	return []Kind{Bias, Dark, Flat, Arc, AllOn, AllOff, Science, RefStar}
}

// Step is one exposure.
type Step struct {
	// Step counts from 1 in the order of the night: step i is Steps[i-1].
	Step int
	Kind Kind
	// Lamp names the calibration lamp of a Flat or Arc in at most eight
	// characters; it is empty for every other kind.
	Lamp           string
	ExptimeSeconds float64
	// MaskID is the digest of the mask shown; Write fills it in.
	MaskID string
	// Row is the code row shown, counted from 0, or -1 where the mask is no
	// code row.
	Row int
	// Cycle counts the complete cycles of Science steps, and those of coded
	// Flats, from 1; it is 0 for a step of no cycle.
	Cycle int
}

// Element is what one code column drives.
type Element struct {
	Column int
	// Element is the field order j = 0..n-1, or -1 for a dark column.
	Element int
	// First and Last bound the strip's u, inclusive; both are -1 for a dark
	// column.
	First, Last int
	Dark        bool
}

// The uses of a range of mirror rows.
const (
	// UseCoded rows follow the code.
	UseCoded = "coded"
	// UseSentinel rows show one element alone in every science step.
	UseSentinel = "sentinel"
	// UseClosed rows are off in every step, for one element or for all.
	UseClosed = "closed"
)

// RowRange says what the mirror rows First..Last (w, inclusive) do.
type RowRange struct {
	First, Last int
	// Use is UseCoded, UseSentinel or UseClosed.
	Use string
	// Element is the element a sentinel shows or a closed range closes; -1 for
	// coded rows and for rows closed for all elements.
	Element int
}

// Sequence is a planned night. The fields that Write fills in are said so; a
// Sequence that Read returned is complete and consistent.
type Sequence struct {
	// Family is the name of the code's family.
	Family string
	// V, K, L are the code's size, the open columns of a row and the columns
	// two rows share.
	V, K, L int
	// Poly holds the bits of an m-sequence's polynomial, 0 for other families.
	Poly uint32
	// OrderSeed is the seed that ordered the science steps.
	OrderSeed uint64
	// ProfileName, ProfileSHA and TargetSHA identify the profile and the target
	// (lower-case hex SHA-256 of their YAML). Write fills them in.
	ProfileName, ProfileSHA, TargetSHA string
	Steps                              []Step
	// Code holds, for each step, the v code bits (0 or 1) it shows. Steps may
	// share a slice: it is not to be changed.
	Code [][]uint8
	// Elements has one entry a code column, in order of column.
	Elements []Element
	Rows     []RowRange
	Profile  *instrument.Profile
	Target   *Target
	// SHA is the lower-case hex SHA-256 of sequence.fits (the SEQSHA of later
	// products). Write and Read fill it in.
	SHA string
}

// N is the number of elements.
func (s *Sequence) N() int {
	n := 0
	for _, e := range s.Elements {
		if !e.Dark {
			n++
		}
	}
	return n
}

// ElementMirrors is the width of an element in u.
func (s *Sequence) ElementMirrors() int {
	for _, e := range s.Elements {
		if !e.Dark {
			return e.Last - e.First + 1
		}
	}
	return 0
}

// FieldCenterU is the middle of the strips: halfway between the first u of
// element 0 and the last u of element n-1. The target's RA and DEC lie there.
func (s *Sequence) FieldCenterU() float64 {
	cols := s.ElementColumns()
	if len(cols) == 0 {
		return 0
	}
	return float64(s.Elements[cols[0]].First+s.Elements[cols[len(cols)-1]].Last) / 2
}

// ElementColumns gives the code column of each element, indexed by j.
func (s *Sequence) ElementColumns() []int {
	cols := make([]int, 0, len(s.Elements))
	for _, e := range s.Elements {
		if !e.Dark {
			cols = append(cols, e.Column)
		}
	}
	return cols
}

// DarkColumns gives the dark columns in ascending order.
func (s *Sequence) DarkColumns() []int {
	var cols []int
	for _, e := range s.Elements {
		if e.Dark {
			cols = append(cols, e.Column)
		}
	}
	return cols
}

// StepsOf gives the indices into Steps (and Code) of the steps of a kind.
func (s *Sequence) StepsOf(k Kind) []int {
	var at []int
	for i, st := range s.Steps {
		if st.Kind == k {
			at = append(at, i)
		}
	}
	return at
}
