package report

import (
	"fmt"

	"mirrorloom/pipeline/product"
)

// onSkySentences say what was done to the cube once it was made; none if nothing was.
func onSkySentences(run *product.Run) []string {
	var all []string
	if s := run.Sky; s != nil {
		all = append(all, fmt.Sprintf("The light of the sky was subtracted, as %d places show it (%s of those that see it whole), chosen %s; its own error is %s of it.",
			s.Places, percent(s.Share), s.Chosen, percent(s.RelError)))
	}
	return all
}

// skyFacts are figures of the sky.
func skyFacts(s *product.SkyReport) []fact {
	if s == nil {
		return nil
	}
	all := []fact{
		{"Blank sky", fmt.Sprintf("%d places, %s of those that can be used, chosen %s", s.Places, percent(s.Share), s.Chosen)},
		{"Residual of the blank sky", fmt.Sprintf("mean square %.3f in units of the variance", s.Chi2)},
		{"Error of the sky", fmt.Sprintf("%s of it, %.2f times that of independent voxels, in the median", percent(s.RelError), s.Correlated)},
	}
	if s.Lines > 0 {
		all = append(all, fact{"Lines of the sky", fmt.Sprintf("%d wavelengths flagged SKYLINE; there the mean square residual is %.3f", s.Lines, s.Chi2Lines)})
	}
	if s.Noise > 0 {
		all = append(all, fact{"Scatter of the blank sky in white light", fmt.Sprintf("%.2f times its errors", s.Noise)})
	}
	return all
}
