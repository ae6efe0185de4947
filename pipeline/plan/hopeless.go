package plan

import (
	"fmt"
	"strings"

	"mirrorloom/pipeline/sequence"
)

// seenSNR is the S/N below which a measurement is hardly one: three standard deviations
// (common practice, no source).
const seenSNR = 3

// warnTimes warns where calibrations take longer than science.
func (r *Summary) warnTimes(s *sequence.Sequence) {
	science, others := 0.0, 0.0
	var longest KindTotal
	for _, k := range r.Kinds {
		switch k.Kind {
		case sequence.Science, sequence.AllOff:
			science += k.Minutes
		default:
			others += k.Minutes
			if k.Minutes > longest.Minutes {
				longest = k
			}
		}
	}
	if science > 0 && others > science {
		r.warn("calibrations take %.0f minutes and science %.0f, all-off frames included: cut calibration.%s, which takes %.0f, or allow more time", others, science, longest.Kind, longest.Minutes)
	}
}

// warnFaint warns of what is wanted and will hardly be seen.
func (r *Summary) warnFaint(s *sequence.Sequence) {
	var faint []string
	for _, m := range r.Forecast.Wanted {
		if m.Voxels > 0 && m.SNR < seenSNR {
			faint = append(faint, fmt.Sprintf("%s (S/N %.1f)", m.Name, m.SNR))
		}
	}
	if len(faint) == 0 {
		return
	}
	cure := "give a longer dwell_s or more code.cycles"
	if s.Target.Forecast.Limits.TotalSeconds > 0 {
		cure = "allow a larger forecast.limits.total_s"
	}
	r.warn("%s will hardly be seen, below a S/N of %d: %s, wider elements or a larger aperture", strings.Join(faint, ", "), seenSNR, cure)
}
