package audit

// Kind is what is wrong with a frame.
type Kind string

// The kinds of wrong frames.
const (
	// Exchanged frames show one another's masks.
	Exchanged Kind = "exchanged"
	// Moved frames show the mask of a row whose own frame is missing or wrong.
	Moved Kind = "moved"
	// Stale frames show the mask of another row, which has a frame of its own.
	Stale Kind = "stale"
	// Inverted masks are open where they should be closed, within the elements.
	Inverted Kind = "inverted"
	// Flipped masks are mirrored along the dispersion.
	Flipped Kind = "flipped"
	// Slipped masks are shifted along the dispersion.
	Slipped Kind = "slipped"
	// Unknown frames show no mask that the audit knows.
	Unknown Kind = "unknown"
)

// Finding is a frame that does not show the mask it is labelled with.
type Finding struct {
	Kind Kind
	// Frame is the frame's index, Row the code row of its label.
	Frame, Row int
	// Shows is the code row that it does show, -1 for none.
	Shows int
	// Mirrors is by how many mirrors a slipped mask moved, towards larger u.
	Mirrors int
	// LogOdds are the natural logarithm of the odds against the label.
	LogOdds float64
	// Sigma is the rms change that the frame makes in decoded voxels, in units of
	// their errors.
	Sigma float64
}

// Repaired tells whether the frame can be used for another row.
func (f Finding) Repaired() bool { return f.Kind == Exchanged || f.Kind == Moved }

// HarmlessSigma is the rms change of voxels below which a fault is called harmless: no
// voxel then changes by 0.05 of its error, unless it is five times the rms.
const HarmlessSigma = 0.01

// Harmless tells whether the fault matters to no voxel.
func (f Finding) Harmless() bool { return f.Sigma < HarmlessSigma }

// Verdict is what the audit found of a cycle.
type Verdict struct {
	// Pairing is the frame of each code row, -1 for none: the best.
	Pairing []int
	// Whole says in words how the frames as a whole are paired differently from their
	// labels; empty if they are not. WholeLogOdds are its odds.
	Whole        string
	WholeLogOdds float64
	// AllInverted tells that every mask is inverted, which leaves the dark columns
	// dark and turns the light negative, by so many standard errors.
	AllInverted    bool
	NegativeSigmas float64
	Findings       []Finding
	// Chi2 is the dark columns' chi-square per degree of freedom with the best
	// pairing.
	Chi2 float64
	// Pixels is the size of the sample.
	Pixels int
	// Sure tells that every other way to pair two frames is excluded by the odds, or
	// harmless.
	Sure bool
	// Wanted is the size that the sample should have to exclude those that are not;
	// Pixels where more would not help.
	Wanted int
}
