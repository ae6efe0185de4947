package plan

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/sequence"
)

// CalibrationSize says whether the calibration frames of a kind are enough for what is wanted.
//
// Errors of calibrations are common to all frames and elements. A level that is taken off all
// frames, known from N frames of variance s^2, decodes to 1/k of itself: it adds s^2/(N k^2) to
// every element of a pixel, all of them alike, so that a sum over pixels with the weights
// w_jp, j the element, gets
//
//	L/N,  L = sum_p s_p^2 (sum_j w_jp)^2 / k^2.
//
// The forecast has it (forecast.Levels). The response of a pixel, known from E electrons of
// the lamp, errs by 1/sqrt(E) of itself, and so do all elements' lights f_jp there:
//
//	R/E,  R = sum_p (sum_j w_jp f_jp)^2
//
// (10^4 times the square of forecast.Measure.ResponseSigma), E = cycles k full/2 for coded flats whose
// all-on frames fill half of full, the charge at which a pixel saturates. A line's place errs
// by its width over the S/N, so that an arc line of E electrons, of the same width, errs as
// much as a wanted line of S/N sqrt(E) does; a pixel filled to half makes E = full/2 sqrt(pi/(4 ln 2))
// FWHM in each row and each element that has an arc, rows and elements of the wanted circle.
//
// With V what is left of the variance without the calibration, the noise grows by the part a
// where the calibration adds ((1+a)^2 - 1) V: 0.1025 V for a = 5 %. Counts of bias and dark
// frames share it so that they take the least time, N in proportion to sqrt(L/seconds)
// (Neyman's allocation; Cochran, Sampling Techniques, section 5.5).
type CalibrationSize struct {
	Kind sequence.Kind `json:"kind"`
	// Planned is how many there are, Needed how many it takes: bias, dark and all-off frames,
	// coded cycles of flats, exposures of each element of arcs.
	Planned int `json:"planned"`
	Needed  int `json:"needed"`
	// Enough tells whether the noise grows by less than MostAdded.
	Enough bool `json:"enough"`
	// Adds is the part by which the planned ones make the noise larger, in the measurement
	// that asks for most; 0 where none are planned or they do not enter.
	Adds float64 `json:"adds_to_noise"`
	// Wanted is that measurement's name, "" where the kind does not enter.
	Wanted string `json:"wanted,omitempty"`
	// Verdict is a clause in words.
	Verdict string `json:"verdict"`
}

// MostAdded is the part by which a kind of calibration may make a measurement's noise larger:
// forecasts are right within as much.
const MostAdded = 0.05

// roomFor is the variance that may be added to one of 1.
const roomFor = (1+MostAdded)*(1+MostAdded) - 1

// mostFrames is the largest number that is asked for: sequences have no room for more.
const mostFrames = maxSteps

// leastSNR is below what nothing is measured, whatever the calibrations.
const leastSNR = 1

// added is by which part noise grows if its variance does by the part r.
func added(r float64) float64 { return math.Sqrt(1+r) - 1 }

// framesFor is the number of frames that keep to the room, if n of them add the part r.
func framesFor(n int, r float64) int {
	return int(min(math.Ceil(float64(n)*r/roomFor*(1-1e-9)), mostFrames))
}

// sized is a kind's need by one measurement.
type sized struct {
	needed int
	adds   float64
}

// calibrationSizes judges each kind by the measurement that asks for most of it. Nil without
// one.
func calibrationSizes(s *sequence.Sequence, f *forecast.Result) []CalibrationSize {
	if f == nil {
		return nil
	}
	c := s.Target.Calibration
	kinds := []CalibrationSize{
		{Kind: sequence.Bias, Planned: c.Bias.Count}, {Kind: sequence.Dark, Planned: c.Dark.Count},
		{Kind: sequence.Flat, Planned: c.Flat.CodedCycles}, {Kind: sequence.Arc, Planned: c.Arc.Count},
		{Kind: sequence.AllOff, Planned: len(s.StepsOf(sequence.AllOff))},
	}
	any := false
	for i := range f.Wanted {
		m := &f.Wanted[i]
		if m.Voxels == 0 || !(m.SNR >= leastSNR) {
			continue
		}
		any = true
		for k, need := range needs(s, f, m) {
			if at := &kinds[k]; need.needed > at.Needed || need.needed > 0 && need.needed == at.Needed && need.adds > at.Adds {
				at.Needed, at.Adds, at.Wanted = need.needed, need.adds, m.Name
			}
		}
	}
	if !any {
		return nil
	}
	for i := range kinds {
		kinds[i].judge(kinds[4].Planned > 0)
	}
	return kinds
}

// needs are those of one measurement, in the order of calibrationSizes.
func needs(s *sequence.Sequence, f *forecast.Result, m *forecast.Measure) [5]sized {
	c := s.Target.Calibration
	var n [5]sized
	n[0], n[1] = levelNeeds(s, m)
	n[2] = flatNeed(c.Flat.CodedCycles, s.K, f.Saturation.Limit, m)
	n[3] = arcNeed(c.Arc, s, f.Saturation.Limit, m)
	if off := m.Levels.AllOff; off > 0 && off < 1 {
		r := off / (1 - off)
		n[4] = sized{framesFor(len(s.StepsOf(sequence.AllOff)), r), added(r)}
	}
	return n
}

// levelNeeds are those of bias and dark frames.
func levelNeeds(s *sequence.Sequence, m *forecast.Measure) (bias, dark sized) {
	c, overhead := s.Target.Calibration, s.Profile.OverheadS()
	b, d := m.Levels.Bias, m.Levels.Dark
	rest := 1 - b - d
	if b+d <= 0 || rest <= 0 {
		return bias, dark
	}
	bias.adds, dark.adds = added(b/rest), added(d/rest)
	// One frame of each adds so much.
	oneBias, oneDark := b/rest*float64(c.Bias.Count), d/rest*float64(c.Dark.Count)
	bias.needed, dark.needed = allocate(oneBias, oneDark, overhead, c.Dark.DwellSeconds+overhead)
	if (b+d)/rest <= roomFor { // as they are, in other proportions
		bias.needed, dark.needed = min(bias.needed, c.Bias.Count), min(dark.needed, c.Dark.Count)
	}
	return bias, dark
}

// allocate is how many frames of two kinds, of which one adds a and b to a variance of 1 and
// takes so many seconds, keep to the room in the least time.
func allocate(a, b, secondsA, secondsB float64) (int, int) {
	const least = 1e-3 // s: a detector that is read at once
	wa, wb := math.Sqrt(a/max(secondsA, least)), math.Sqrt(b/max(secondsB, least))
	both := math.Sqrt(a*max(secondsA, least)) + math.Sqrt(b*max(secondsB, least))
	count := func(w float64) int { return int(min(math.Ceil(w*both/roomFor*(1-1e-9)), mostFrames)) }
	return count(wa), count(wb)
}

// flatNeed is that of coded cycles, whose k all-on frames' worth fill pixels to half of full.
func flatNeed(cycles, k int, full float64, m *forecast.Measure) sized {
	electrons := float64(k) * full / 2
	if !(electrons > 0) {
		return sized{}
	}
	one := math.Pow(100*m.ResponseSigma/m.Sigma, 2) / electrons // one cycle adds
	need := sized{needed: max(1, framesFor(1, one))}
	if cycles > 0 {
		need.adds = added(one / float64(cycles))
	}
	return need
}

// arcNeed is that of exposures of each arc element, of lines that fill a pixel to half of full.
func arcNeed(a sequence.ArcFrames, s *sequence.Sequence, full float64, m *forecast.Measure) sized {
	need := sized{needed: 1}
	if !m.Line || full <= 0 {
		return need // a band asks for wavelengths, not for their last per cent
	}
	channels := (m.ToNM - m.FromNM) / s.Profile.Grid.StepNM
	cells := math.Max(1, m.Voxels/channels/float64(max(a.Every, 1)))
	gauss := math.Sqrt(math.Pi / (4 * math.Ln2))
	one := m.SNR * m.SNR / (cells * full / 2 * gauss * s.Profile.Spectrograph.LSFFWHMPx)
	need.needed = max(1, framesFor(1, one))
	if a.Count > 0 {
		need.adds = added(one / float64(a.Count))
	}
	return need
}

// judge says whether there are enough.
func (c *CalibrationSize) judge(allOff bool) {
	c.Enough = c.Planned >= c.Needed
	unit, lamp := "", ""
	switch c.Kind {
	case sequence.Flat:
		unit, lamp = " coded cycles", ", if all-on frames fill pixels to half of saturation"
	case sequence.Arc:
		unit, lamp = " of each element", ", if a line fills pixels to half of saturation"
	}
	switch level := c.Kind == sequence.Bias || c.Kind == sequence.Dark; {
	case level && allOff:
		c.Verdict = "the noise asks for none: all-off frames give the level"
	case c.Needed == 0 && c.Planned == 0:
		c.Verdict = "none planned, and the forecast reckons with none"
	case c.Enough && c.Adds < 0.0005:
		c.Verdict = fmt.Sprintf("enough: adds less than 0.1 %% to the noise of %s%s", c.named(), lamp)
	case c.Enough:
		c.Verdict = fmt.Sprintf("enough: adds %.1f %% to the noise of %s%s", 100*c.Adds, c.named(), lamp)
	case c.Planned == 0:
		c.Verdict = fmt.Sprintf("take %d%s: then less than %.0f %% is added to the noise of %s%s", c.Needed, unit, 100*MostAdded, c.named(), lamp)
	default:
		c.Verdict = fmt.Sprintf("take %d more%s: %d add %.1f %% to the noise of %s, more than %.0f %%%s", c.Needed-c.Planned, unit, c.Planned, 100*c.Adds, c.named(), 100*MostAdded, lamp)
	}
}

func (c *CalibrationSize) named() string {
	if c.Wanted == "" {
		return "anything wanted"
	}
	return c.Wanted
}

// keys of the target by kind.
var sizeKeys = map[sequence.Kind]string{
	sequence.Bias: "calibration.bias.count", sequence.Dark: "calibration.dark.count", sequence.Flat: "calibration.flat.coded_cycles",
	sequence.Arc: "calibration.arc.count", sequence.AllOff: "all_off_every (smaller)",
}

// judgeCalibrations adds the sizes, and a warning of those below what is needed. What is not
// planned at all is warned of already.
func (r *Summary) judgeCalibrations(s *sequence.Sequence) {
	r.Calibrations = calibrationSizes(s, r.Forecast)
	for _, c := range r.Calibrations {
		if !c.Enough && c.Planned > 0 {
			r.warn("%s: %s", sizeKeys[c.Kind], c.Verdict)
		}
	}
}
