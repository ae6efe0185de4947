package reached

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"mirrorloom/pipeline/product"
)

// What is worth a word: light that is off by more than lightWorth and so many of its errors;
// noise, and the S/N, by more than what a forecast is good to; what all measurements share by more than
// shareWorth; frames by more than factorWorth, causes of noise by more than causeWorth, parts
// of it and of the voxels by more than those.
const (
	lightWorth  = 0.02
	lightSigmas = 3
	noiseWorth  = 0.05
	shareWorth  = 0.03
	factorWorth = 0.005
	causeWorth  = 0.02
	partWorth   = 0.05
	goodWorth   = 0.02
)

// explain sets the sentences.
func (n *Night) explain(f *product.Forecast) {
	frames := n.framesWords(f)
	for i := range f.Wanted {
		if w := &f.Wanted[i]; w.Why == "" {
			w.Why = why(f, w, frames)
		}
	}
	if frames != "" {
		f.Notes = append(f.Notes, sentence(fmt.Sprintf("%s: the noise is that of %.3g whole cycles, of %d planned", frames, f.CyclesReached, f.Cycles)))
	}
	if note := alike(f.Wanted); note != "" {
		f.Notes = append(f.Notes, note)
	}
	if p := f.Passed; p != nil {
		f.Notes = append(f.Notes, fmt.Sprintf("The reference star says that telescope and instrument let %.2f pass of what the profile says.", *p))
	}
	if s := f.Sky; s != nil && math.Abs(s.Value-1) > max(shareWorth, lightSigmas*s.Error) {
		f.Notes = append(f.Notes, fmt.Sprintf("The sky is %.2f times as bright as forecast.", s.Value))
	}
	if r := f.ReadNoise; r != nil && math.Abs(*r-1) > shareWorth {
		f.Notes = append(f.Notes, fmt.Sprintf("The read noise is %.2f times that of the profile.", *r))
	}
}

func sentence(s string) string { return strings.ToUpper(s[:1]) + s[1:] + "." }

// framesWords say what frames there are fewer of; empty for none.
func (n *Night) framesWords(f *product.Forecast) string {
	var parts []string
	steps := f.Steps
	if n.Asked > 0 && n.Asked < f.Cycles {
		parts = append(parts, fmt.Sprintf("%d of %d cycles %s reduced", n.Asked, f.Cycles, were(n.Asked)))
		steps = steps / f.Cycles * n.Asked
	}
	if lost := steps - f.Frames; lost > 0 {
		parts = append(parts, fmt.Sprintf("%d of %d frames %s lost", lost, steps, were(lost)))
	}
	return strings.Join(parts, ", and ")
}

func were(n int) string {
	if n == 1 {
		return "was"
	}
	return "were"
}

// why says what explains a measurement's ratio, what changed the S/N most first.
func why(f *product.Forecast, w *product.Reached, frames string) string {
	switch {
	case w.Plan.SNR == 0:
		return "the plan does not see it"
	case w.SNR == nil:
		return "no voxel of it is good in this cube" + flagWords(w.Flags)
	case w.Ratio == nil:
		return "the forecast has no light in the voxels that are good"
	}
	causes := causesOf(f, w, frames)
	said := slices.DeleteFunc(slices.Clone(causes), func(c cause) bool { return !c.said })
	if len(said) == 0 && math.Abs(*w.Ratio-1) > noiseWorth {
		// Each is too little to be named by itself.
		said = []cause{slices.MaxFunc(causes, bySize)}
	}
	if len(said) == 0 {
		return "as forecast, within the errors"
	}
	slices.SortStableFunc(said, func(a, b cause) int { return bySize(b, a) })
	var parts []string
	light := false
	for _, c := range said {
		parts = append(parts, c.text())
		light = light || c.light
	}
	if !light {
		parts = append(parts, fmt.Sprintf("its light is as forecast (%s)", figure(*w.LightRatio, *w.LightRatioError)))
	}
	return strings.Join(parts, "; ")
}

// cause is something that changed the S/N by a factor.
type cause struct {
	factor float64
	words  string
	// said: it is worth a word by itself. light: it is of the light wanted.
	said, light bool
}

func bySize(a, b cause) int {
	return cmp.Compare(math.Abs(math.Log(a.factor)), math.Abs(math.Log(b.factor)))
}

// text is the words with the factor, where it shows.
func (c cause) text() string {
	if math.Abs(c.factor-1) <= factorWorth {
		return c.words
	}
	return fmt.Sprintf("%s (S/N × %.2f)", c.words, c.factor)
}

// causesOf are the four factors whose product is the ratio: of frames and voxels, of the error
// of the frames' throughput, of light and of noise.
func causesOf(f *product.Forecast, w *product.Reached, frames string) []cause {
	through := 1.0
	if w.ThroughputRatio != nil {
		through = *w.ThroughputRatio
	}
	taken := framesCause(w, frames)
	taken.factor = *w.TimeRatio / through
	light := cause{factor: *w.LightRatio, light: true}
	light.words, light.said = lightWords(w)
	noise := cause{factor: 1 / *w.NoiseRatio, said: math.Abs(*w.NoiseRatio-1) >= noiseWorth, words: noiseWords(f, w)}
	return []cause{taken, throughputCause(f, w, through), light, noise}
}

// framesCause is what there is less of.
func framesCause(w *product.Reached, frames string) cause {
	var parts []string
	if frames != "" {
		parts = append(parts, frames)
	}
	if lost := 1 - w.Good; lost > goodWorth {
		parts = append(parts, fmt.Sprintf("%.0f %% of its voxels are not good%s", 100*lost, flagWords(w.Flags)))
	}
	if len(parts) == 0 {
		return cause{words: "the frames used, and the place and grid of the cube, differ a little from the plan's"}
	}
	return cause{words: strings.Join(parts, ", and "), said: true}
}

// flagWords are the flags that make voxels bad, in brackets; empty for none.
func flagWords(parts []product.FlagPart) string {
	var all []string
	for _, p := range parts {
		if p.Part > factorWorth {
			all = append(all, fmt.Sprintf("%.0f %% %s", 100*p.Part, p.Name))
		}
	}
	if len(all) == 0 {
		return ""
	}
	return " (" + strings.Join(all, ", ") + ")"
}

// throughputCause is the error of the frames' throughput, where the plan expected another one.
func throughputCause(f *product.Forecast, w *product.Reached, factor float64) cause {
	share := fmt.Sprintf("the error of the frames' throughput, %.2g %% a frame, is %.0f %% of the variance", 100*f.ThroughputErr, 100*w.Throughput)
	if factor > 1 {
		share = fmt.Sprintf("the frames' throughput is known to %.2g %%, better than planned", 100*f.ThroughputErr)
	}
	return cause{factor: factor, words: share, said: math.Abs(factor-1) > causeWorth}
}

// figure is a value with its error, to a figure of the error that is not 0.
func figure(value, err float64) string {
	digits := 2
	if err < 0.01 {
		digits = 3
	}
	return fmt.Sprintf("%.*f ± %.*f", digits, value, digits, err)
}

// lightWords compare the light; said tells whether it differs by more than its error explains.
func lightWords(w *product.Reached) (words string, said bool) {
	ratio, err := *w.LightRatio, *w.LightRatioError
	if math.Abs(ratio-1) < max(lightWorth, lightSigmas*err) {
		return fmt.Sprintf("its light is %s of the forecast's, which its own error explains", figure(ratio, err)), false
	}
	what := "fainter than forecast, or less of its light came through"
	if ratio > 1 {
		what = "brighter than forecast, or more of its light came through"
	}
	return fmt.Sprintf("its light is %s of the forecast's: the source is %s", figure(ratio, err), what), true
}

// noiseWords say how the noise differs, and what is known to make it so.
func noiseWords(f *product.Forecast, w *product.Reached) string {
	ratio := *w.NoiseRatio
	var causes []string
	cause := func(of float64, words string) {
		if (of-1)*(ratio-1) > 0 && math.Abs(of-1) > causeWorth {
			causes = append(causes, fmt.Sprintf(words, of))
		}
	}
	if f.Sky != nil && math.Abs(f.Sky.Value-1) > max(shareWorth, lightSigmas*f.Sky.Error) {
		cause(f.Sky.Value, "the sky is %.2f times as bright as forecast")
	}
	if f.ReadNoise != nil && math.Abs(*f.ReadNoise-1) > shareWorth {
		cause(*f.ReadNoise, "the read noise is %.2f times the profile's")
	}
	if w.ErrorScale > 0 {
		cause(w.ErrorScale, "the squares of what the dark columns show are %.2f times what detector and light make them")
	}
	if ratio > 1 {
		for _, p := range []struct {
			part float64
			of   string
		}{{w.Lamps, "the responses that lamps measured"}, {w.Throughput, "the frames' throughput"}} {
			if p.part > partWorth {
				causes = append(causes, fmt.Sprintf("%.0f %% of its square are errors of %s", 100*p.part, p.of))
			}
		}
	} else if *w.LightRatio < 1-lightWorth {
		causes = append(causes, "there is less light")
	}
	text := fmt.Sprintf("the noise is %.2f times the forecast's", ratio)
	if len(causes) > 0 {
		text += " (" + strings.Join(causes, "; ") + ")"
	}
	return text
}

// alike says whether all light is off alike; empty if it is not, or cannot be told.
func alike(all []product.Reached) string {
	const known = 0.05 // relative error from which on a light ratio counts
	var ratios, errors []float64
	for _, w := range all {
		if w.LightRatio != nil && *w.LightRatioError < known {
			ratios, errors = append(ratios, *w.LightRatio), append(errors, *w.LightRatioError)
		}
	}
	if len(ratios) < 2 {
		return ""
	}
	sorted := slices.Clone(ratios)
	slices.Sort(sorted)
	middle := (sorted[(len(sorted)-1)/2] + sorted[len(sorted)/2]) / 2
	if math.Abs(middle-1) < shareWorth {
		return ""
	}
	for i, r := range ratios {
		if math.Abs(r-middle) > lightWorth+lightSigmas*errors[i] {
			return ""
		}
	}
	return fmt.Sprintf("The light of all %d that can be told is alike %.2f of the forecast's: air, telescope and instrument may have let so much of it pass.", len(ratios), middle)
}
