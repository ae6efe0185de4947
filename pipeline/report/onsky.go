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
	if f := run.Flux; f != nil {
		all = append(all, fmt.Sprintf("Counts became flux by a reference star, of whose light %s was measured; the rest, lost at the edges of the aperture or slit, is put back, with an error of %s of the flux. In all the common factor is known to %s.",
			percent(f.SlitFraction), percent(f.SlitRelError), percent(f.RelError)))
	}
	return all
}

// fluxFacts are figures of the reference star.
func fluxFacts(f *product.FluxReport) []fact {
	if f == nil {
		return nil
	}
	air := "by the site's extinction"
	if !f.Extinction {
		air = "no extinction is known"
	}
	var wide []fact
	if f.Frames > 0 {
		how := "found by the ends of the band and the lines of the star"
		if f.ElementAssumed {
			how = "where the telescope was to point, as its spectrum does not tell"
		}
		wide = []fact{{"Star in the wide element", fmt.Sprintf("%d frames, which differ by %s of their mean's light; its place, on which wavelengths depend, is known to %.3f elements, %s", f.Frames, percent(f.FrameError), f.ElementError, how)}}
	}
	return append(wide, []fact{
		{"Reference star", fmt.Sprintf("%s with %s, at element %.2f, row %.2f, %.2f arcsec wide", f.Star, f.Table, f.Element, f.Row, f.FWHMArcsec)},
		{"Slit loss of the star", fmt.Sprintf("%s of its light was measured; relative error %s", percent(f.SlitFraction), percent(f.SlitRelError))},
		{"Air mass", fmt.Sprintf("%.3f of the star, %.3f of the science frames: %s", f.StarAirmass, f.Airmass, air)},
		{"Sensitivity", fmt.Sprintf("from %d voxels of the star (%d rejected), which scatter about it by %s; error of the factor %s, in the median", f.Used, f.Rejected, percent(f.RMS), percent(f.RelError))},
		{"Largest efficiency", percent(f.Efficiency)},
	}...)
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
