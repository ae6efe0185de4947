package product

// Throughput is what was found of the science frames' throughput, offsets and leak, in
// run.json.
type Throughput struct {
	// Verdict says in words what was measured, how well, and what to do where it was
	// not.
	Verdict string `json:"verdict"`
	// State is the same for programs.
	State ThroughputState `json:"state"`
	// Methods are those that measured, in the order in which they were combined.
	Methods []ThroughputMethod `json:"methods,omitempty"`
	// HeldOut is what each step of the correction gained.
	HeldOut []HeldOutStep `json:"dark_chi2_heldout,omitempty"`
	// Terms are parts of the light that varied apart from it and were corrected.
	Terms []ThroughputTerm `json:"terms,omitempty"`
	// Leak is the factor of the all-off frames' light; absent where it was not measured.
	Leak *Measured `json:"leak_factor,omitempty"`
	// Offset is the rms of the frames' own levels, electrons, and the error of one;
	// absent where there is no unlit pixel.
	Offset *Measured `json:"offset_rms_e,omitempty"`
	// Image is what sentinel rows tell of the image's motion; absent without.
	Image *ImageMotion `json:"image,omitempty"`
}

// ThroughputState is what is known of the frames' throughput.
type ThroughputState string

// The states.
const (
	ThroughputSteady      ThroughputState = "steady"      // the dark columns show no drift; nothing was corrected
	ThroughputCorrected   ThroughputState = "corrected"   // it varied, was measured and corrected
	ThroughputUncertain   ThroughputState = "uncertain"   // the scene cannot measure it frame by frame
	ThroughputUnexplained ThroughputState = "unexplained" // the dark columns are uneasy, and no correction helps
	ThroughputUnchecked   ThroughputState = "unchecked"   // corrected, by a monitor or sentinels, with nothing to check it
	ThroughputUnmeasured  ThroughputState = "unmeasured"  // nothing measures it
)

// ThroughputMethod is one way of measuring throughput.
type ThroughputMethod struct {
	Name string `json:"name"` // dark columns, sentinel rows, monitor
	// RMS is that of c around 1, Error the rms of its standard errors, by this method.
	RMS   float64 `json:"rms"`
	Error float64 `json:"err"`
	// Share is the part of the information that comes from this method.
	Share float64 `json:"share"`
	// Used tells whether it went into the correction.
	Used bool `json:"used"`
}

// ThroughputTerm is a part of the light whose share varied from frame to frame.
type ThroughputTerm struct {
	Name string `json:"name"` // slope over the band, sky lines' part
	// RMS is that over the frames of what was corrected: of the slope, the difference
	// between the band's ends; of the sky lines, relative. Error is that of a frame.
	RMS   float64 `json:"rms"`
	Error float64 `json:"err"`
}

// HeldOutStep is the chi-square of dark columns that a step's fit has not seen, before
// and after it, over what noise gives: 1 if all is well.
type HeldOutStep struct {
	Step   string  `json:"step"`
	Before float64 `json:"before"`
	After  float64 `json:"after"`
	Kept   bool    `json:"kept"`
}

// ImageMotion is the rms over the frames of the image's place and width on the
// detector, with the error of a frame's.
type ImageMotion struct {
	XPx      Measured `json:"x_rms_px"`
	YPx      Measured `json:"y_rms_px"`
	FWHMPart Measured `json:"fwhm_rms"` // relative, of the width along the slit
	// Slope is the rms of the throughput's slope, the difference between the ends of
	// the band, beyond the error of a frame's, and that error.
	Slope Measured `json:"slope_rms"`
}
