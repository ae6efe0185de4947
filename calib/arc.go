package calib

// Arcs, in the order of work:
//
//	peaks, err := DefaultPeakRule(fwhm).Find(exposure, first, last)  // each frame
//	solution, err := SolveArcs(nominal, []ArcFrame{...}, DefaultArcRule())
//	g := solution.Geometry                                           // x of every line
//
// The trace of section "Trace" (FitTrace) is independent of it: arcs are measured on
// detector rows, where the model of x needs no trace.

// LampLine is a listed line of a lamp.
type LampLine struct {
	VacuumNM float64
	// Intensity is relative; it is believed within a factor of ten or so.
	Intensity float64
}

// ArcFrame is what one exposure of a lamp through a single element showed.
type ArcFrame struct {
	Element int
	Lines   []LampLine // of the frame's lamp, within the instrument's band
	Peaks   []Peak     // of PeakRule.Find
}
