package report

import (
	"fmt"

	"mirrorloom/pipeline/product"
)

// starFacts say what listed stars told of the cube's place on the sky; none without.
func starFacts(s *product.Stars) []fact {
	if s == nil {
		return nil
	}
	all := []fact{
		{"Listed stars", fmt.Sprintf("%d of %d in the field were used, of %s; a coordinate's rms is %.3f″", s.Used, s.InField, s.File, s.RMSArcsec)},
		{"Pointing against what was asked for", fmt.Sprintf("%+.3f ± %.3f″ east, %+.3f ± %.3f″ north, turned by %+.4f ± %.4f°: corrected",
			s.East.Value, s.East.Error, s.North.Value, s.North.Error, s.Turn.Value, s.Turn.Error)},
	}
	if s.Scale.Error > 0 {
		all = append(all, fact{"Scale against the profile's", fmt.Sprintf("%.5f ± %.5f, parity %d: corrected", s.Scale.Value, s.Scale.Error, s.Parity)})
	}
	for _, star := range s.Stars {
		text := star.Why
		if star.Element != nil {
			text = fmt.Sprintf("at element %.2f, row %.2f: %+.3f″ east, %+.3f″ north of the fit", *star.Element, *star.Row, *star.East, *star.North)
			if !star.Used {
				text += ", not used: " + star.Why
			}
		}
		all = append(all, fact{"Star " + star.Name, text})
	}
	return all
}
