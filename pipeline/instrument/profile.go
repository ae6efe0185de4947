package instrument

// Profile is an instrument. Units are in the names of the keys; numbers are
// finite; every key must be written but the ones said to be optional.
type Profile struct {
	// Name identifies the instrument in the INSTRUME and PROFNAME cards: 1 to
	// 32 letters, digits, dots, hyphens or underscores.
	Name         string       `yaml:"name"`
	Telescope    Telescope    `yaml:"telescope"`
	Site         Site         `yaml:"site"`
	DMD          DMD          `yaml:"dmd"`
	Spectrograph Spectrograph `yaml:"spectrograph"`
	Detector     Detector     `yaml:"detector"`
	Keywords     Keywords     `yaml:"keywords" config:"optional"`
	Kinds        Kinds        `yaml:"kinds" config:"optional"`
	Grid         Grid         `yaml:"grid"`

	files map[string][]byte
	stuck []StuckMirror
}

// Telescope is what collects the light.
type Telescope struct {
	// DiameterM is the diameter of the primary mirror, metres.
	DiameterM float64 `yaml:"diameter_m"`
	// ObscuredFraction is the share of the primary's area in shadow, 0 <= f < 1.
	ObscuredFraction float64 `yaml:"obscured_fraction"`
	// Throughput is the transmission from the primary to the DMD, atmosphere
	// excluded.
	Throughput Curve `yaml:"throughput"`
}

// Mountings of the device.
const (
	Square   = "square"
	Diagonal = "diagonal"
)

// DMD is the micromirror device at the telescope's focus.
type DMD struct {
	// Columns and Rows count the mirrors.
	Columns int `yaml:"columns"`
	Rows    int `yaml:"rows"`
	// PitchUM is the distance of neighbouring mirrors, micrometres.
	PitchUM float64 `yaml:"pitch_um"`
	// Mounting is Square or Diagonal.
	Mounting string `yaml:"mounting"`
	// TiltDeg is the mirrors' tilt from flat in both states, degrees.
	TiltDeg float64 `yaml:"tilt_deg"`
	// IncidenceDeg is the angle of the light that comes to the device's normal, in the plane
	// of the tilt and positive towards the side to which on mirrors turn, degrees. Optional;
	// nil for 0.
	IncidenceDeg *float64 `yaml:"incidence_deg" config:"optional"`
	// ArcsecPerMirror is the side of a mirror on the sky, arc seconds.
	ArcsecPerMirror float64 `yaml:"arcsec_per_mirror"`
	// Parity is 1 where east lies towards -axis 1 at position angle 0, as seen
	// on the sky, and -1 where an odd number of reflections turns it about.
	// Optional; 1.
	Parity int `yaml:"parity" config:"optional"`
	// Contrast is the light of an on mirror over that of an off mirror.
	Contrast Contrast `yaml:"contrast"`
	// StuckCSV names a CSV file beside the profile with the mirrors that do not
	// move (see StuckMirror). Optional; empty when all move.
	StuckCSV string `yaml:"stuck_csv" config:"optional"`
	// LoadS is the time that loading a mask takes before each exposure, seconds,
	// beyond what passes while the detector is read. Optional; nil for 0.
	LoadS *float64 `yaml:"load_s" config:"optional"`
}

// SetDefaults gives the optional keys their defaults.
func (d *DMD) SetDefaults() { d.Parity = 1 }

// Spectrograph is what lies between the DMD and the detector; the package's
// documentation has the equations of its geometry.
type Spectrograph struct {
	// FNumber is the focal ratio of the beam at the DMD.
	FNumber float64 `yaml:"f_number"`
	// PupilOversize is the diameter of the spectrograph's pupil over that of
	// the beam's image there, at least 1.
	PupilOversize float64 `yaml:"pupil_oversize"`
	// CenterNM is L_c: the vacuum wavelength, nm, that the middle of the field
	// sends to (XCenterPx, YCenterPx).
	CenterNM float64 `yaml:"center_nm"`
	// DispersionPxPerNM holds d1, d2, d3 in px/nm, px/nm^2 and px/nm^3.
	DispersionPxPerNM [3]float64 `yaml:"dispersion_px_per_nm,flow"`
	// UStepPx and WStepPx are the distance of the images of neighbouring u and
	// of neighbouring w, px.
	UStepPx float64 `yaml:"u_step_px"`
	WStepPx float64 `yaml:"w_step_px"`
	// XCenterPx and YCenterPx are x_c and y_c, in active pixels from 0.
	XCenterPx float64 `yaml:"x_center_px"`
	YCenterPx float64 `yaml:"y_center_px"`
	// SlitTilt is the shift of x a row, px/px.
	SlitTilt float64 `yaml:"slit_tilt"`
	// SmilePerPx is the curvature of the slit's image, px/px^2.
	SmilePerPx float64 `yaml:"smile_per_px"`
	// TraceTilt is the shift of y a column, px/px.
	TraceTilt float64 `yaml:"trace_tilt"`
	// TraceCurvePerPx is the curvature of a spectrum's trace, px/px^2.
	TraceCurvePerPx float64 `yaml:"trace_curve_per_px"`
	// LSFFWHMPx is the full width at half maximum of one mirror's light at one
	// wavelength, a circular Gaussian in x and y, px; the mirror's own size is
	// in it.
	LSFFWHMPx float64 `yaml:"lsf_fwhm_px"`
	// Throughput is the transmission from the DMD to detected electrons,
	// quantum efficiency included.
	Throughput Curve `yaml:"throughput"`
}

// Detector is the sensor and its electronics.
type Detector struct {
	// Columns and Rows count the active pixels.
	Columns int `yaml:"columns"`
	Rows    int `yaml:"rows"`
	// Amplifiers read a section each; together their data sections tile the
	// active pixels.
	Amplifiers []Amplifier `yaml:"amplifiers"`
	// DarkEPerS is the dark current, electrons per second and pixel.
	DarkEPerS float64 `yaml:"dark_e_per_s"`
	// ReadMode is how an exposure is read; see Mode. Optional; a single read.
	ReadMode *ReadMode `yaml:"read_mode,flow" config:"optional"`
	// SaturationADU is the lowest raw value that is not to be trusted, ADU,
	// bias included.
	SaturationADU float64 `yaml:"saturation_adu"`
	// Linearity holds c1, c2, ... of the correction
	// linear = m (1 + c1 m + c2 m^2 + ...), m the measured ADU above bias; c1
	// in 1/ADU, c2 in 1/ADU^2, and so on. Optional; none for a linear detector.
	Linearity []float64 `yaml:"linearity,flow" config:"optional"`
	// ReadS is the time from the end of an exposure to the start of the next,
	// seconds.
	ReadS float64 `yaml:"read_s"`
}

// Kinds of ReadMode.
const (
	SingleRead = "single"
	DoubleRead = "double"
	FowlerRead = "fowler"
	RampRead   = "ramp"
)

// ReadMode is how an exposure of an infrared array is made of reads that leave the
// charge in place.
type ReadMode struct {
	// Kind is SingleRead; DoubleRead, the difference of two reads; FowlerRead, that
	// of the means of two groups of reads; or RampRead, a straight line through reads
	// equally spaced over the exposure.
	Kind string `yaml:"kind"`
	// Reads are those of each group, at least 1, or of the ramp, at least 2. Optional;
	// single and double have none.
	Reads int `yaml:"reads" config:"optional"`
	// Spacing is the time between the reads of a group, in units of that between the
	// first reads of the two groups: at most 1/reads. Optional; 0. fowler only.
	Spacing float64 `yaml:"spacing" config:"optional"`
}

// Mode is ReadMode, filled in.
func (d *Detector) Mode() ReadMode {
	if d.ReadMode == nil {
		return ReadMode{Kind: SingleRead}
	}
	return *d.ReadMode
}

// Amplifier is one readout chain.
type Amplifier struct {
	// Data and Overscan are sections of the raw frame; Overscan is optional.
	Data     Section  `yaml:"data,flow"`
	Overscan Overscan `yaml:"overscan,flow" config:"optional"`
	// GainEPerADU is electrons per ADU.
	GainEPerADU float64 `yaml:"gain_e_per_adu"`
	// ReadNoiseE is the standard deviation of one read, electrons; that of the whole
	// exposure depends on Detector.ReadMode.
	ReadNoiseE float64 `yaml:"read_noise_e"`
	// BiasADU is the level without light, ADU.
	BiasADU float64 `yaml:"bias_adu"`
}

// Keywords maps what mirrorloom needs of a frame's header to the FITS keyword
// that carries it. Optional; each key has its own name as default.
type Keywords struct {
	Step     string `yaml:"step" config:"optional"`
	MaskID   string `yaml:"maskid" config:"optional"`
	Kind     string `yaml:"kind" config:"optional"`
	Exptime  string `yaml:"exptime" config:"optional"`  // seconds
	DateObs  string `yaml:"date_obs" config:"optional"` // ISO 8601, UTC
	Airmass  string `yaml:"airmass" config:"optional"`
	RA       string `yaml:"ra" config:"optional"`     // degrees
	Dec      string `yaml:"dec" config:"optional"`    // degrees
	RotAng   string `yaml:"rotang" config:"optional"` // degrees
	Instrume string `yaml:"instrume" config:"optional"`
}

// SetDefaults gives every keyword its default.
func (k *Keywords) SetDefaults() {
	*k = Keywords{
		Step: "STEP", MaskID: "MASKID", Kind: "KIND", Exptime: "EXPTIME", DateObs: "DATE-OBS",
		Airmass: "AIRMASS", RA: "RA", Dec: "DEC", RotAng: "ROTANG", Instrume: "INSTRUME",
	}
}

// Kinds maps each kind of step to the word that frames carry for it in the
// keyword Keywords.Kind. Optional; each kind is its own word by default.
type Kinds struct {
	Bias    string `yaml:"bias" config:"optional"`
	Dark    string `yaml:"dark" config:"optional"`
	Flat    string `yaml:"flat" config:"optional"`
	Arc     string `yaml:"arc" config:"optional"`
	AllOn   string `yaml:"all-on" config:"optional"`
	AllOff  string `yaml:"all-off" config:"optional"`
	Science string `yaml:"science" config:"optional"`
	RefStar string `yaml:"refstar" config:"optional"`
}

// SetDefaults makes the map the identity.
func (k *Kinds) SetDefaults() {
	*k = Kinds{
		Bias: "bias", Dark: "dark", Flat: "flat", Arc: "arc",
		AllOn: "all-on", AllOff: "all-off", Science: "science", RefStar: "refstar",
	}
}
