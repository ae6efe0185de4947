package report

import "mirrorloom/pipeline/product"

// Trust says in one word whether a product can be used.
type Trust string

// The words.
const (
	TrustYes  Trust = "yes"  // whole, its errors hold, and nothing is to be looked at
	TrustLook Trust = "look" // usable when what is to be looked at has been
	TrustNo   Trust = "no"   // its errors, or much of its data, cannot be used as they are
)

// Verdict is the page's verdict for other readers.
type Verdict struct {
	Headline string
	Trust    Trust
	// Reasons are what is known for and against it, Do what to look at.
	Reasons, Do []string
}

// leastGood is the part of the voxels that fall on the detector below which too little is
// left to be called a cube.
const leastGood = 0.5

// Judge weighs a run as report.html does.
func Judge(run *product.Run, ledger product.Ledger) Verdict {
	v := judge(Input{Run: run, Ledger: ledger}, "cube")
	j := Verdict{Headline: v.Headline, Trust: TrustYes, Reasons: v.Trust, Do: v.Look}
	q := run.Quality
	switch chi2 := q.DarkChi2Heldout; {
	case q.CoveredGoodFraction < leastGood, chi2 != nil && *chi2 > 1+chi2Slack:
		j.Trust = TrustNo
	case !v.Whole, chi2 == nil, *chi2 < 1-chi2Slack, len(v.Look) > 0:
		j.Trust = TrustLook
	}
	return j
}
