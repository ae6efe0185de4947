package report

// Trust says in one word whether a product can be used.
type Trust string

// The words.
const (
	TrustYes  Trust = "yes"  // whole, its errors hold, and nothing is to be looked at
	TrustLook Trust = "look" // usable when what Look lists has been looked at
	TrustNo   Trust = "no"   // its errors, or much of its data, cannot be used as they are
)

// Judgement is the page's verdict for other readers.
type Judgement struct {
	Headline string
	Trust    Trust
	// Reasons are what is known for and against it, Look what to look at.
	Reasons, Look []string
}

// leastGood is the part of the voxels that fall on the detector below which too little is
// left to be called a cube.
const leastGood = 0.5

// Judge weighs a run as report.html does; what is its product's name.
func Judge(in Input, what string) Judgement {
	v := judge(in, what)
	j := Judgement{Headline: v.Headline, Trust: TrustYes, Reasons: v.Trust, Look: v.Look}
	q := in.Run.Quality
	switch chi2 := q.DarkChi2Heldout; {
	case q.CoveredGoodFraction < leastGood, chi2 != nil && *chi2 > 1+chi2Slack:
		j.Trust = TrustNo
	case !v.Whole, chi2 == nil, *chi2 < 1-chi2Slack, len(v.Look) > 0:
		j.Trust = TrustLook
	}
	return j
}
