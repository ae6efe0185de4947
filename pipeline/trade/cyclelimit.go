package trade

import (
	"fmt"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// Rule is what limits the time of a cycle.
type Rule string

// The rules. All but RuleKey follow from what is no factor per frame, which no dark column
// can tell apart from light: its rms in a cycle may be a tenth (of an element, a pixel, the
// seeing). Those do not hold for a slit scan, whose frames are not decoded together.
const (
	RuleNone       Rule = ""
	RuleKey        Rule = "cycle_s"
	RuleRefraction Rule = "refraction"
	RuleFlexure    Rule = "flexure"
	RuleSeeing     Rule = "seeing"
	// RuleSky warns only: dark columns measure the sky's lines apart.
	RuleSky Rule = "sky"
)

// mostPerCycle is by how much what is no factor per frame may change in a cycle: elements of
// guiding, pixels of the image, parts of the seeing and of the sky's lines. Steady changes
// have an rms of their span over the root of 12, here a tenth, which the error scale answers
// for: with 0.1 element of guiding errors it brings bright stars' pulls of 4 to 16 back to 1.
// Shorter cycles cost read noise.
const mostPerCycle = 0.35

// CycleLimit is how long a cycle may take.
type CycleLimit struct {
	// Rule is the one that asks for the shortest cycle, RuleNone for no limit.
	Rule Rule `json:"rule"`
	// Seconds is the limit.
	Seconds float64 `json:"seconds"`
	// NM is the wavelength that refraction moves most, vacuum nm; 0 for other rules.
	NM float64 `json:"nm,omitempty"`
}

// LimitsOf are the limits of a candidate's cycle, whose science frames take so many seconds:
// all that its target, its instrument and its sky set, each rule once.
func LimitsOf(target *sequence.Target, profile *instrument.Profile, light *forecast.Light, c forecast.Candidate, scienceSeconds float64) []CycleLimit {
	limits := target.Forecast.Limits
	list := []CycleLimit{}
	take := func(l CycleLimit) {
		if l.Seconds > 0 {
			list = append(list, l)
		}
	}
	take(CycleLimit{Rule: RuleKey, Seconds: limits.CycleSeconds})
	if c.Family == string(hadamard.SlitScan) {
		return list
	}
	drift := light.RefractionDrift(c, scienceSeconds)
	element := profile.ArcsecPerU() * float64(c.ElementMirrors)
	take(CycleLimit{Rule: RuleRefraction, Seconds: secondsOf(drift.ArcsecPerHour / element), NM: drift.NM})
	take(CycleLimit{Rule: RuleFlexure, Seconds: secondsOf(limits.FlexurePxPerHour)})
	take(CycleLimit{Rule: RuleSeeing, Seconds: secondsOf(limits.SeeingChangePerHour)})
	return list
}

// LimitOf is the shortest of LimitsOf; the zero value stands for none.
func LimitOf(target *sequence.Target, profile *instrument.Profile, light *forecast.Light, c forecast.Candidate, scienceSeconds float64) CycleLimit {
	var shortest CycleLimit
	for _, l := range LimitsOf(target, profile, light, c, scienceSeconds) {
		if shortest.Rule == RuleNone || l.Seconds < shortest.Seconds {
			shortest = l
		}
	}
	return shortest
}

// SkyLimit is the time in which the sky's lines change as much as is thought harmless; the
// zero value where the target does not say how fast they do.
func SkyLimit(target *sequence.Target) CycleLimit {
	rate := target.Forecast.Limits.SkyChangePerHour
	if rate == 0 {
		return CycleLimit{}
	}
	return CycleLimit{Rule: RuleSky, Seconds: secondsOf(rate)}
}

// secondsOf is the time of a change by mostPerCycle; 0 for no change.
func secondsOf(perHour float64) float64 {
	if perHour == 0 {
		return 0
	}
	return mostPerCycle / perHour * 3600
}

// broken tells whether a cycle is longer.
func (l CycleLimit) broken(cycleSeconds float64) bool {
	return l.Rule != RuleNone && cycleSeconds > l.Seconds*(1+1e-9)
}

// cause is the rule in words; "" for none.
func (l CycleLimit) cause() string {
	switch l.Rule {
	case RuleKey:
		return "forecast.limits.cycle_s"
	case RuleRefraction:
		return fmt.Sprintf("refraction, which moves light of %.5g nm by %g elements in that time", l.NM, mostPerCycle)
	case RuleFlexure:
		return fmt.Sprintf("flexure, by which the image drifts %g px in that time", mostPerCycle)
	case RuleSeeing:
		return fmt.Sprintf("seeing, which changes by %g %% in that time", 100*mostPerCycle)
	case RuleSky:
		return fmt.Sprintf("the sky's lines, which change by %g %% in that time", 100*mostPerCycle)
	}
	return ""
}

// String is one clause, "" for no limit.
func (l CycleLimit) String() string {
	if l.Rule == RuleNone {
		return ""
	}
	return fmt.Sprintf("a cycle may take %s: the limit is that of %s", seconds(l.Seconds), l.cause())
}

// cure is by what a cycle that is too long would be possible.
func (l CycleLimit) cure(cycleSeconds float64) string {
	switch l.Rule {
	case RuleKey:
		return fmt.Sprintf("forecast.limits.cycle_s of %s, or wider elements", seconds(cycleSeconds))
	case RuleRefraction:
		return "wider elements, a code of fewer columns, or wanted wavelengths nearer the guide's"
	case RuleFlexure:
		return fmt.Sprintf("forecast.limits.flexure_px_h of %.2g, or a code of fewer columns", mostPerCycle*3600/cycleSeconds)
	}
	return fmt.Sprintf("forecast.limits.seeing_change_per_h of %.2g, or a code of fewer columns", mostPerCycle*3600/cycleSeconds)
}

// Warning is one sentence with the cure about a cycle that is longer than a limit, "" about
// one that is not.
func (l CycleLimit) Warning(cycleSeconds float64) string {
	if !l.broken(cycleSeconds) {
		return ""
	}
	text := fmt.Sprintf("a cycle takes %s of the %s that are allowed by %s; ", seconds(cycleSeconds), seconds(l.Seconds), l.cause())
	switch l.Rule {
	case RuleRefraction:
		return text + "give a shorter dwell_s and more code.cycles, or a narrower band about the guide's wavelength"
	case RuleSky:
		return text + "give a shorter dwell_s and more code.cycles, unless the dark columns are to measure the lines apart"
	}
	return text + "give a shorter dwell_s and more code.cycles"
}
