package product

// Calibration is what the lamps told of the instrument, in run.json. What was not
// measured is absent.
type Calibration struct {
	Amplifiers  []Amplifier `json:"amplifiers,omitempty"`
	Persistence *Measured   `json:"persistence,omitempty"`
	Arcs        *Arcs       `json:"arcs,omitempty"`
	Trace       *Trace      `json:"trace,omitempty"`
	Flat        *Flat       `json:"flat,omitempty"`
	Neighbour   []AtNM      `json:"neighbour,omitempty"` // d, a fraction of the light
	Contrast    []AtNM      `json:"contrast,omitempty"`  // on over off
	FlatDepth   []DepthAtSN `json:"flat_depth,omitempty"`
	// Remarks are sentences on what is far from the profile's word.
	Remarks []string `json:"remarks,omitempty"`
}

// Measured is a value with its standard error.
type Measured struct {
	Value float64 `json:"value"`
	Error float64 `json:"error"`
}

// AtNM is a value at a vacuum wavelength with its standard error.
type AtNM struct {
	WavelengthNM float64 `json:"wavelength_nm"`
	Value        float64 `json:"value"`
	Error        float64 `json:"error"`
}

// Amplifier holds what pairs of frames told of an amplifier.
type Amplifier struct {
	GainEPerADU    float64 `json:"gain_e_per_adu"`
	GainError      float64 `json:"gain_error"`
	ReadNoiseE     float64 `json:"read_noise_e"`
	ReadNoiseError float64 `json:"read_noise_error"`
}

// Arcs is the wavelength solution.
type Arcs struct {
	Lines    int `json:"lines"` // centroids used
	Rejected int `json:"rejected"`
	// RMSPx is that of the centroids around the solution, WorstErrorPx the largest
	// standard error of the solution over the elements, rows and voxels of the cube.
	RMSPx        float64 `json:"rms_px"`
	WorstErrorPx float64 `json:"worst_error_px"`
	// ShiftPx is how far the light is from the profile's place at the centre of the
	// field and band, DispersionRatio d1 over the profile's.
	ShiftPx         float64 `json:"shift_px"`
	DispersionRatio float64 `json:"dispersion_ratio"`
	// WidthPx is the FWHM of lines against wavelength.
	WidthPx []AtNM `json:"width_px"`
	// ByPlace and ByLine are the residuals of the centroids used, by element and row and by
	// wavelength.
	ByPlace []ArcPlace `json:"by_place,omitempty"`
	ByLine  []ArcLine  `json:"by_line,omitempty"`
}

// ArcPlace sums up the residuals of arc lines, measured less fitted, seen through an element
// in a stretch of detector rows, both inclusive and from 0.
type ArcPlace struct {
	Element  int `json:"element"`
	FirstRow int `json:"first_row"`
	LastRow  int `json:"last_row"`
	Residual
}

// ArcLine sums up the residuals of a line.
type ArcLine struct {
	WavelengthNM float64 `json:"wavelength_nm"`
	Residual
}

// Residual is the mean of some residuals, their rms about 0 and their number.
type Residual struct {
	MeanPx float64 `json:"mean_px"`
	RMSPx  float64 `json:"rms_px"`
	Number int     `json:"number"`
}

// Trace is the path of the spectra across the rows.
type Trace struct {
	Tilt  float64 `json:"tilt"`         // px/px
	Curve float64 `json:"curve_per_px"` // 1/px
	RMSPx float64 `json:"rms_px"`
	Ends  int     `json:"ends"` // measured places of the slit's ends
	// OffsetPx is measured minus nominal row of the slit's ends, not applied.
	OffsetPx *Measured `json:"offset_px,omitempty"`
}

// Flat is the response of pixels and light path.
type Flat struct {
	PixelRMS float64 `json:"pixel_rms"` // of the pixels' responses
	// SlitRMS and EfficiencyRMS are those of the slit function and the efficiency.
	SlitRMS       float64 `json:"slit_rms"`
	EfficiencyRMS float64 `json:"efficiency_rms"`
	// PeriodVoxels is the shortest wave in wavelength that the efficiency holds.
	PeriodVoxels float64 `json:"period_voxels"`
	LowPixels    int     `json:"low_pixels"`
	// AddedVariance is the median of the variance that the response adds to a
	// voxel, over the voxel's photon and read variance; absent without a cube.
	AddedVariance float64 `json:"added_variance,omitempty"`
}

// DepthAtSN is how flat the corrected flat is in cells of a size: the rms of their
// deviations beside what their photons allow.
type DepthAtSN struct {
	Side int     `json:"side"` // rows and columns of a cell
	SN   float64 `json:"sn"`
	RMS  float64 `json:"rms"`
	// Excess is the rms beyond the photons' noise, 0 where there is none, and its
	// standard error.
	Excess      float64 `json:"excess"`
	ExcessError float64 `json:"excess_error"`
}
