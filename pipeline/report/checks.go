package report

import (
	"encoding/json"
	"fmt"
	"math"

	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

const (
	// Errors hold if the scatter of the dark columns agrees with them within 3 %, a
	// chi-square within 6 %: what a clean night is required to reach.
	chi2Slack = 0.06
	// Where no error scale was measured, errors more than this many times too small say
	// nothing; where it was, they say little if it is so large in the mean of the pixels
	// and was needed in most of them: then noise is not what rules. (Rehearsed: seeing that
	// varies by 30 % gives 1.9, a third of the masks flipped 4.2, frames stale 8.)
	hopelessChi2 = 16.0
	hopelessMean = 4.0
	mostPixels   = 0.5
	// Frames that the audit cannot tell apart although they differ so much from what their
	// masks give contradict each other. Bad seeing, which it can tell, gives 2 to 3.
	contradictedChi2 = 3.0
	// A flag on half of the voxels is no matter of places. A cube with fewer good voxels
	// than fewGood has places to look at: a clean night keeps 99 %.
	wholeShare = 0.5
	fewGood    = 0.95
	// Restoring lost frames makes noise larger by this much where half as many were lost as
	// there are dark columns; beyond, one set of lost frames in a hundred cannot be restored.
	muchGrowth = 1.4
	// What a wavelength solution is to reach everywhere, px.
	figurePx = 0.05
)

// checksOf looks at everything that has a bearing on trust.
func checksOf(run *product.Run, ledger product.Ledger) []Check {
	q := run.Quality
	checks := []Check{checkFrames(run, ledger)}
	if c, ok := checkMasks(run); ok {
		checks = append(checks, c)
	}
	checks = append(checks, checkDark(run), checkThroughput(run), checkWavelengths(run))
	if c, ok := checkFlat(run); ok {
		checks = append(checks, c)
	}
	if c, ok := checkSaturated(q); ok {
		checks = append(checks, c)
	}
	if c, ok := checkHits(q); ok {
		checks = append(checks, c)
	}
	if hasVoxels(q) {
		checks = append(checks, checkGood(run))
	}
	if run.Exit != 0 {
		checks = append(checks, checkExit(run, checks))
	}
	return checks
}

// checkExit is for what is not whole and has no figure of its own.
func checkExit(run *product.Run, others []Check) Check {
	c := Check{Name: "Whole", Figure: fmt.Sprintf("exit code %d", run.Exit), Level: TrustLook, Do: "Read what is listed below."}
	for _, o := range others {
		if o.Level != TrustYes { // which says it better
			return c
		}
	}
	c.Says = "Something that was asked for is not in it."
	if len(run.Warnings) > 0 { // reasons come first
		c.Says = sentence(run.Warnings[0])
	}
	return c
}

// scienceSteps counts the science steps and those with a frame, and the frames that the
// ledger gave to another step than their label says.
func scienceSteps(l product.Ledger) (all, used, relabelled int) {
	for _, e := range l {
		if e.Step > 0 && e.Kind == string(sequence.Science) {
			all++
			if e.Verdict.Used() {
				used++
			}
			if e.Verdict == product.Relabelled {
				relabelled++
			}
		}
	}
	return all, used, relabelled
}

// checkFrames tells whether the frames are there, or were restored.
func checkFrames(run *product.Run, ledger product.Ledger) Check {
	all, used, _ := scienceSteps(ledger)
	q := run.Quality
	c := Check{Name: "Science frames", Figure: fmt.Sprintf("%d of %d used", used, all), Level: TrustYes}
	lost := q.FlagShare(product.FlagLost)
	const again = "Take the missing steps again, and reduce once more; the section on frames lists them."
	switch {
	case lost >= wholeShare || q.Lost > 0 && q.RestoredGrowth == nil:
		c.Level, c.Do = TrustNo, again
		c.Says = fmt.Sprintf("%d of %d frames are missing or show no mask of this sequence: too many to restore, so that the cube does not show the field.", all-used, all)
	case lost > 0:
		c.Level, c.Do = TrustLook, again
		c.Says = fmt.Sprintf("%s of the voxels lack the frames that would show them (flag LOST).", percent(lost))
	case q.RestoredGrowth != nil && q.Lost > 0:
		c.Figure += fmt.Sprintf("; noise × %.2f", *q.RestoredGrowth)
		c.Says = fmt.Sprintf("%s lost and restored from the dark columns; that makes the noise %.0f %% larger, as the errors say.", counted(q.Lost, "frame was", "frames were"), 100*(*q.RestoredGrowth-1))
		c.notable = true
		if *q.RestoredGrowth > muchGrowth {
			c.Level, c.Do = TrustLook, again
		}
	case used < all:
		c.Says = fmt.Sprintf("%d of %d frames were used; each step of the code is seen at least once.", used, all)
	case all > 0:
		c.Says = fmt.Sprintf("All %d frames are there.", all)
	}
	return c
}

func counted(n int, one, more string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, more)
}

// auditOf is what the audit found; nil without one. Of a run that was read it is JSON.
func auditOf(run *product.Run) *pair.Audit {
	switch a := run.Audit.(type) {
	case nil:
		return nil
	case *pair.Audit:
		return a
	}
	text, err := json.Marshal(run.Audit)
	a := new(pair.Audit)
	if err != nil || json.Unmarshal(text, a) != nil {
		return nil // of another version
	}
	return a
}

// takeAgain is all that helps where frames contradict each other.
const takeAgain = "Look at the frames that fit worst, at the device's log and at the guiding; then take the night again."

// checkMasks tells whether the frames show their masks.
func checkMasks(run *product.Run) (Check, bool) {
	a := auditOf(run)
	if a == nil || a.Skipped != "" || len(a.Cycles) == 0 {
		return Check{}, false
	}
	c := Check{Name: "Masks", Figure: "as labelled", Level: TrustYes}
	repaired, wrong := 0, 0
	for _, cycle := range a.Cycles {
		if !cycle.Sure && cycle.Chi2 > contradictedChi2 {
			c.Level, c.Figure = TrustNo, fmt.Sprintf("cannot be told; chi-square %.3g", cycle.Chi2)
			c.Says = "The frames contradict each other, as if many showed other masks than their labels say, or the light moved: which frame shows which mask cannot be told."
			c.Do = takeAgain
			return c, true
		}
		if cycle.AllInverted {
			c.Level, c.Figure = TrustNo, "all inverted"
			c.Says = "Every mask of the night was inverted: mirrors that should be open were closed, and all light in the cube is negative."
			c.Do = "Find out why the device shows the opposite of what it is sent, and take the night again."
			return c, true
		}
		if cycle.Whole != "" {
			c.Figure = "frames " + cycle.Whole
			c.Says = fmt.Sprintf("The labels were wrong: the frames are %s. The dark columns showed which mask each has.", cycle.Whole)
			c.notable = true
		}
		for _, f := range cycle.Findings {
			switch {
			case f.Harmless:
			case f.Repaired:
				repaired++
			default:
				wrong++
			}
		}
	}
	if repaired+wrong > 0 {
		c.Figure = fmt.Sprintf("%d relabelled, %d not used", repaired, wrong)
		c.Says = fmt.Sprintf("%s: %d served the step shown, %d could not be used.", counted(repaired+wrong, "frame shows another mask than its label says", "frames show another mask than their label says"), repaired, wrong)
		c.notable = true
	}
	return c, true
}

// checkDark tells whether what must be zero is.
func checkDark(run *product.Run) Check {
	q := run.Quality
	c := Check{Name: "Dark columns", Figure: "none", Level: TrustYes}
	chi2 := q.DarkChi2Heldout
	if chi2 == nil {
		c.Level, c.Says = TrustLook, "Nothing checks the errors: the code has no dark columns, or too few."
		c.Do = "Plan dark columns for the next night; until then compare the scatter of blank sky with its errors."
		return c
	}
	c.Figure = fmt.Sprintf("chi-square %.3f; 1 is due", *chi2)
	scale := q.ErrorScale
	const moved = "seeing, guiding, flexure, or frames that are none of this field's"
	switch {
	case scale != nil && scale.Mean > hopelessMean && scale.Applied > mostPixels:
		c.Level = TrustNo
		c.Says = fmt.Sprintf("The frames contradict each other almost everywhere: columns that no mirror lights scatter %.0f times as much as noise.", math.Sqrt(scale.Mean))
		c.Do = takeAgain
	case scale != nil && *chi2 > 1+chi2Slack:
		c.Level = TrustLook
		c.Says = fmt.Sprintf("In %s of the pixels something changed from frame to frame (%s). The errors there were made larger, up to %.2g times: they hold, but the light may be blurred.", percent(scale.Applied), moved, math.Sqrt(scale.Max))
		c.Do = "Look at the map of the error scale; elsewhere the cube can be used as it is."
	case *chi2 > hopelessChi2:
		c.Level = TrustNo
		c.Says = fmt.Sprintf("The frames contradict each other: columns that no mirror lights scatter %.0f times as much as their errors.", math.Sqrt(*chi2))
		c.Do = "Look for frames that drifted or are not of this field, and reduce without them."
	case *chi2 > 1+chi2Slack:
		c.Level = TrustLook
		c.Says = fmt.Sprintf("The errors are too small: columns that no mirror lights scatter %.2f times as much.", math.Sqrt(*chi2))
		c.Do = fmt.Sprintf("Multiply all errors by %.2g (VARIANCE by %.2g), and look for frames that drifted.", math.Sqrt(*chi2), *chi2)
	case *chi2 < 1-chi2Slack:
		c.Level = TrustLook
		c.Says = "The errors are too large: columns that no mirror lights scatter less than they say."
		c.Do = "Check gain and read noise in the profile."
	default:
		c.Says = "Columns that no mirror lights decode to zero within their errors, so that the errors can be believed."
	}
	return c
}

// checkThroughput tells what became of clouds and haze.
func checkThroughput(run *product.Run) Check {
	t := run.Throughput
	c := Check{Name: "Throughput", Figure: "not measured", Level: TrustYes}
	state := product.ThroughputUnmeasured
	if t != nil {
		state = t.State
	}
	if run.Combined != nil {
		return Check{Name: "Throughput", Figure: "see the runs", Level: TrustYes}
	}
	q := run.Quality
	const cure = "Next time plan sentinel rows on a star or bright sky, or give the table of a monitor."
	switch state {
	case product.ThroughputSteady:
		c.Figure, c.Says = "steady", "The frames' throughput was steady."
	case product.ThroughputCorrected, product.ThroughputUnchecked:
		c.notable = true
		c.Figure, c.Says = "corrected", "What varied from frame to frame was measured and corrected."
		if q.ThroughputRMS != nil && q.ThroughputErr != nil {
			c.Figure = fmt.Sprintf("varied by %s; known to %s", percent(*q.ThroughputRMS), percent(*q.ThroughputErr))
			c.Says = fmt.Sprintf("The frames' throughput varied by %s; that was measured and corrected, with an error of %s that is in VARIANCE.", percent(*q.ThroughputRMS), percent(*q.ThroughputErr))
		}
		if state == product.ThroughputUnchecked {
			c.Level = TrustLook
			c.Says += " No dark column checks it."
			c.Do = cure
		}
	case product.ThroughputUncertain:
		c.Level, c.Figure = TrustLook, "not known frame by frame"
		c.Says = "This scene cannot tell how the throughput varied from frame to frame: bright sources may have left stripes of light in other elements of their rows."
		c.Do = "Look at the rows of the brightest sources. " + cure
	case product.ThroughputUnexplained:
		c.Level, c.Figure = TrustLook, "varied, not corrected"
		c.Says = "The frames differ, and no correction of their throughput explains how."
		c.Do = "Look at the rows of the brightest sources and at the frames that fit worst."
	case product.ThroughputUnmeasured:
		c.Level = TrustLook
		c.Says = "How the throughput varied from frame to frame was not measured."
		c.Do = cure
	}
	return c
}

// checkWavelengths tells where they come from.
func checkWavelengths(run *product.Run) Check {
	q := run.Quality
	c := Check{Name: "Wavelengths", Level: TrustYes}
	worst := 0.0
	if run.Calibration != nil && run.Calibration.Arcs != nil {
		worst = run.Calibration.Arcs.WorstErrorPx
	}
	switch nominal := q.FlagShare(product.FlagNominalWave); {
	case run.Combined != nil:
		c.Figure = "see the runs"
	case nominal > 0:
		c.Level, c.Figure = TrustNo, "not measured"
		c.Says = "Wavelengths were not measured: they are the profile's, and may be off by many pixels (flag NOMINALWAVE)."
		c.Do = "Read below why the arcs failed, take them again, and reduce once more."
	case q.WavelengthRMSPx == nil:
		c.Level, c.Figure = TrustLook, "the profile's"
		c.Says = "Wavelengths are the profile's, as the recipe asks: no arc frame checks them."
		c.Do = "Compare lines of the sky with their wavelengths, or reduce with arcs."
	case worst > figurePx:
		c.Level, c.Figure = TrustLook, fmt.Sprintf("± %.2g px at worst", worst)
		c.Says = fmt.Sprintf("Wavelengths are uncertain by %.2g pixels somewhere in the cube.", worst)
		c.Do = "Look at the residuals of the lamp's lines; use a lamp with lines all over the band."
	default:
		c.Figure = fmt.Sprintf("lines within %.3f px rms", *q.WavelengthRMSPx)
		c.Says = fmt.Sprintf("Wavelengths agree with the lamp's lines within %.3f pixels.", *q.WavelengthRMSPx)
	}
	return c
}

// checkFlat tells whether the response was divided out; it says nothing where it was.
func checkFlat(run *product.Run) (Check, bool) {
	low := run.Quality.FlagShare(product.FlagLowFlat)
	c := Check{Name: "Flat field", Figure: "corrected", Level: TrustYes}
	switch {
	case low >= wholeShare:
		c.Level, c.Figure = TrustNo, "not corrected"
		c.Says = "The flat field was not corrected: how bright places are against each other cannot be told (flag LOWFLAT)."
		c.Do = "Take the lamp flats that the sequence asks for, and reduce once more; wavelengths are not touched by it."
	case low > 1-fewGood:
		c.Level, c.Figure = TrustLook, percent(low)+" too low"
		c.Says = fmt.Sprintf("The response is too low to be divided out in %s of the voxels (flag LOWFLAT).", percent(low))
		c.Do = "Look at the map of voxels that are not good."
	case run.Calibration == nil || run.Calibration.Flat == nil:
		return Check{}, false // not asked for
	}
	return c, true
}

// checkSaturated tells of what was too bright; it says nothing where nothing was.
func checkSaturated(q product.Quality) (Check, bool) {
	if q.Saturated == 0 {
		return Check{}, false
	}
	c := Check{Name: "Saturation", Figure: counted(q.Saturated, "pixel", "pixels"), Level: TrustYes, notable: true,
		Says: "What was saturated was restored from the dark columns."}
	if share := q.FlagShare(product.FlagSaturated); share > 0 {
		c.Level = TrustLook
		c.Says = fmt.Sprintf("The brightest light saturated the detector: %s of the voxels are flagged SATURATED and are not good.", percent(share))
		c.Do = "Leave out those voxels, the cores of bright sources; shorten the dwell next time."
	}
	return c, true
}

// checkHits tells of cosmic rays; it says nothing where none were found.
func checkHits(q product.Quality) (Check, bool) {
	if q.Hits == nil || *q.Hits == 0 && q.DoubtfulPixels == 0 {
		return Check{}, false
	}
	c := Check{Name: "Cosmic rays", Figure: fmt.Sprintf("%d hits restored, %d pixels in doubt", *q.Hits, q.DoubtfulPixels), Level: TrustYes,
		Says: fmt.Sprintf("%s by cosmic rays and restored.", counted(*q.Hits, "sample was struck", "samples were struck"))}
	if q.DoubtfulPixels > 0 {
		c.Says = fmt.Sprintf("%s Where it cannot be told which sample was, the voxel is flagged BADPIXEL.", c.Says)
	}
	return c, true
}

// hasVoxels tells whether a cube was made.
func hasVoxels(q product.Quality) bool { return q.GoodFraction > 0 || len(q.Flags) > 0 }

// checkGood tells how much of the cube can be used.
func checkGood(run *product.Run) Check {
	good := run.Quality.CoveredGoodFraction
	c := Check{Name: "Good voxels", Figure: percent(good) + " of those in use", Level: TrustYes}
	if run.Combined != nil {
		good = run.Quality.GoodFraction
		c.Figure = percent(good) + " of all"
		return c
	}
	q := run.Quality
	switch {
	case max(q.FlagShare(product.FlagLost), q.FlagShare(product.FlagNominalWave), q.FlagShare(product.FlagLowFlat)) >= wholeShare:
		c.Level = TrustNo // why is said already
	case good < wholeShare:
		c.Level = TrustNo
		c.Says = fmt.Sprintf("Only %s of the voxels are good.", percent(good))
		c.Do = "See which flags the others have."
	case good < fewGood:
		c.Level = TrustLook
		c.Says = fmt.Sprintf("%s of the voxels are flagged as not good.", percent(1-good))
		c.Do = "Look at the map of voxels that are not good."
	}
	return c
}
