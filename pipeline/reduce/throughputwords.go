package reduce

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/pipeline/product"
)

// The methods' names.
const (
	methodDark     = "dark columns"
	methodSentinel = "sentinel rows"
	methodMonitor  = "monitor"
)

// cures are what to do where a scene cannot measure throughput.
const cures = "plan sentinel rows on a bright star or on bright sky, or give a monitor's table in the recipe (throughput: {use: FILE})"

// throughputVerdict says what was measured, and warns where that is not enough.
func (r *reduction) throughputVerdict(t *throughput) (string, product.ThroughputState) {
	dark := len(r.seq.DarkColumns())
	switch {
	case len(t.report.Terms) > 0 && !t.corrected:
		return fmt.Sprintf("the frames' throughput was left as it is, but %s: the chi-square of dark columns that the fit had not seen went from %.3f to %.3f", t.termWords(), t.before(), t.after()), product.ThroughputCorrected
	case t.found == nil && t.corrected:
		rms, err := scatter(t.belief.c(), t.belief.errors())
		return fmt.Sprintf("the throughput varied by %s rms and was corrected with an error of %s a frame; the %d dark columns of the code are too few to check it", percent(rms), percent(err), dark), product.ThroughputUnchecked
	case t.found == nil:
		if dark >= neededDark(r.seq.V) {
			words := fmt.Sprintf("the throughput of the frames was not measured: too many frames are lost for what %d dark columns can tell", dark)
			r.warn("%s", words)
			return words, product.ThroughputUnmeasured
		}
		words := fmt.Sprintf("the throughput of the frames was not measured: %d dark columns are fewer than the %.0f that it takes; plan more of them, %s", dark, math.Ceil(2*math.Log2(float64(r.seq.V))), cures)
		if dark > 0 {
			r.warn("%s", words)
		}
		return words, product.ThroughputUnmeasured
	case !t.corrected && !t.found.uneasy():
		return fmt.Sprintf("the frames were left as they are: the dark columns show no drift of their throughput (chi-square %.3f where 1 is due)", t.before()), product.ThroughputSteady
	case !t.corrected:
		state := product.ThroughputUnexplained
		words := fmt.Sprintf("the frames were left as they are: no correction of their throughput brought the dark columns that it had not seen nearer to zero (chi-square %.3f, with one fitted to the others %.3f)", t.before(), t.after())
		if !t.measured() {
			words += "; this scene could hardly measure it: " + cures
			state = product.ThroughputUncertain
		}
		r.warn("%s", words)
		return words, state
	}
	rms, err := scatter(t.belief.c(), t.belief.errors())
	words := fmt.Sprintf("the throughput varied by %s rms and was corrected with an error of %s a frame: the chi-square of dark columns that the fit had not seen went from %.3f to %.3f", percent(rms), percent(err), t.before(), t.after())
	if len(t.report.Terms) > 0 {
		words += "; besides, " + t.termWords()
	}
	if !t.measured() {
		words = fmt.Sprintf("this scene cannot measure the throughput of every frame (%.0f of %d patterns): its error is %s a frame where the scatter is %s; %s", t.found.directions, len(t.frames)-len(t.dark.cycles), percent(err), percent(rms), cures)
		r.warn("%s", words)
		return words, product.ThroughputUncertain
	}
	return words, product.ThroughputCorrected
}

// termWords says which terms were corrected.
func (t *throughput) termWords() string {
	var all []string
	for _, m := range t.report.Terms {
		all = append(all, fmt.Sprintf("the %s varied by %s rms and was corrected with an error of %s a frame", m.Name, percent(m.RMS), percent(m.Error)))
	}
	return strings.Join(all, ", ")
}

// before and after are the held-out chi-square without any correction and with all that
// was kept, or with the first if none was.
func (t *throughput) before() float64 { return t.report.HeldOut[0].Before }

func (t *throughput) after() float64 {
	last := t.report.HeldOut[0].After
	for _, h := range t.report.HeldOut {
		if h.Kept {
			last = h.After
		}
	}
	return last
}

// measured tells whether every frame's throughput is known to half of the scatter that
// the night has, or better: beyond a level and a trend in time, which most scenes measure
// however little they tell of single frames.
func (t *throughput) measured() bool {
	return t.belief.detrended(t.times) < t.belief.scatter/2
}

// percent writes a part with two digits.
func percent(part float64) string { return fmt.Sprintf("%.2g %%", 100*part) }
