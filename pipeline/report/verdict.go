package report

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// verdict says in words whether the product can be trusted.
type verdict struct {
	Whole    bool
	Headline string
	Trust    []string // what is known for and against it
	Look     []string // what to look at
	Exit     string   // the exit code and why
}

// Errors hold if the scatter of the dark columns agrees with them within 3 %, a
// chi-square within 6 %: what a clean night is required to reach.
const chi2Slack = 0.06

const exitDegraded = 3

// judge weighs a run. what is the product's name, such as "cube".
func judge(in Input, what string) verdict {
	v := verdict{Whole: in.Run.Exit == 0}
	chi2 := in.Run.Quality.DarkChi2Heldout
	switch {
	case !v.Whole:
		v.Headline = fmt.Sprintf("The %s was written, but it is not whole.", what)
	case chi2 == nil:
		v.Headline = fmt.Sprintf("The %s is whole; its errors were not checked.", what)
	case *chi2 > 1+chi2Slack:
		v.Headline = fmt.Sprintf("The %s is whole, but its errors are too small.", what)
	case *chi2 < 1-chi2Slack:
		v.Headline = fmt.Sprintf("The %s is whole; its errors are too large.", what)
	default:
		v.Headline = fmt.Sprintf("The %s is whole and its errors hold.", what)
	}
	v.Trust = []string{framesSentence(in.Ledger), goodSentence(in.Run.Quality), chi2Sentence(chi2), waveSentence(in.Run.Quality), throughputSentence(in.Run)}
	if in.Run.Combined != nil {
		v.Trust = combinedSentences(in)
	}
	v.Trust = append(v.Trust, onSkySentences(in.Run)...)
	for _, w := range in.Degraded {
		v.Look = append(v.Look, sentence(w))
	}
	for _, w := range in.Run.Warnings {
		if s := sentence(w); !slices.Contains(v.Look, s) {
			v.Look = append(v.Look, s)
		}
	}
	v.Exit = exitSentence(in)
	return v
}

func exitSentence(in Input) string {
	switch in.Run.Exit {
	case 0:
		return "Exit code 0: nothing is missing."
	case exitDegraded:
		why := "see the warnings"
		if len(in.Degraded) > 0 {
			why = strings.Join(in.Degraded, "; ")
		}
		return sentence("Exit code 3: the product was written, but " + why)
	}
	return fmt.Sprintf("Exit code %d.", in.Run.Exit)
}

// sentence gives a clause a capital and a full stop.
func sentence(s string) string {
	s = strings.TrimSpace(s)
	if s == "" {
		return s
	}
	first := []rune(s)[:1]
	s = strings.ToUpper(string(first)) + s[len(string(first)):]
	if !strings.ContainsAny(s[len(s)-1:], ".!?") {
		s += "."
	}
	return s
}

func framesSentence(l product.Ledger) string {
	var lacking []int
	all := 0
	for _, e := range l {
		if e.Step > 0 && e.Kind == string(sequence.Science) {
			all++
			if !e.Verdict.Used() {
				lacking = append(lacking, e.Step)
			}
		}
	}
	if len(lacking) == 0 {
		return fmt.Sprintf("All %d science steps have their frame.", all)
	}
	return fmt.Sprintf("%d of %d science steps have their frame; %s.", all-len(lacking), all, stepList(lacking))
}

// stepList names steps, ranges joined: "lacking are the steps 3, 7 to 9".
func stepList(steps []int) string {
	const most = 12 // ranges; the table has them all
	var parts []string
	for i := 0; i < len(steps); {
		k := i
		for k+1 < len(steps) && steps[k+1] == steps[k]+1 {
			k++
		}
		part := strconv.Itoa(steps[i])
		if k > i {
			part += " to " + strconv.Itoa(steps[k])
		}
		parts = append(parts, part)
		i = k + 1
	}
	if len(parts) > most {
		parts = append(parts[:most], "and more")
	}
	if len(steps) == 1 {
		return "lacking is step " + parts[0]
	}
	return "lacking are the steps " + strings.Join(parts, ", ")
}

func goodSentence(q product.Quality) string {
	return fmt.Sprintf("Of the voxels in coded rows whose wavelength falls on the detector %s are good; of all voxels %s.",
		percent(q.CoveredGoodFraction), percent(q.GoodFraction))
}

func chi2Sentence(chi2 *float64) string {
	switch {
	case chi2 == nil:
		return "Nothing checked the errors: the code has no dark columns, or too few."
	case *chi2 > 1+chi2Slack:
		return fmt.Sprintf("The dark columns, which must decode to zero, scatter more than the errors say (chi-square %.3f where 1 is due): "+
			"take the errors as %.2g times what VARIANCE gives, and look for frames that drifted.", *chi2, math.Sqrt(*chi2))
	case *chi2 < 1-chi2Slack:
		return fmt.Sprintf("The dark columns, which must decode to zero, scatter less than the errors say (chi-square %.3f where 1 is due): "+
			"check gain and read noise in the profile.", *chi2)
	}
	return fmt.Sprintf("The dark columns, which must decode to zero, do so within the errors (chi-square %.3f where 1 is due): the errors can be taken as they are.", *chi2)
}

func waveSentence(q product.Quality) string {
	if q.WavelengthRMSPx == nil {
		return "Wavelengths are the profile's: no arc frame was fitted."
	}
	return fmt.Sprintf("Wavelengths come from arc frames, whose lines agree within %.3f pixel rms.", *q.WavelengthRMSPx)
}

func throughputSentence(run *product.Run) string {
	if run.Throughput == nil {
		return "The throughput of the frames was not measured: each counts the same."
	}
	return sentence(run.Throughput.Verdict)
}
