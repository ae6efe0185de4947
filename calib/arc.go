package calib

// Arcs, in the order of work:
//
//	fwhm := LineFWHM(lsf, X_e)
//	peaks, err := DefaultPeakRule(fwhm).Find(exposure, first, last)  // each frame
//	solution, err := SolveArcs(nominal, []ArcFrame{...}, DefaultArcRule(firstNM, lastNM, fwhm))
//	g := solution.Geometry                                           // x of every line
//
// The trace (FitTrace) and the arcs are independent of each other: arcs are measured
// on detector rows, where the model of x needs no trace.

// LampLine is a listed line of a lamp.
type LampLine struct {
	VacuumNM float64
	// Intensity is relative; it is used only to judge blends, where three either way is allowed for.
	Intensity float64
}

// ArcFrame is what one exposure of a lamp through a single element showed.
type ArcFrame struct {
	Element int
	Lines   []LampLine // of the frame's lamp, within the instrument's band
	Peaks   []Peak     // of PeakRule.Find
}
