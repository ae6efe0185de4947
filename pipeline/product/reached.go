package product

// Forecast is, in run.json, what the plan's forecast expected beside what was reached. Light
// and errors are electrons in one science exposure, before the sky and the flux: Signal is the
// light wanted, Sigma the standard deviation of the sum of all light in its voxels, as the
// plan gives them.
type Forecast struct {
	// Steps is the number of science steps that were planned, Frames of those used.
	Steps  int `json:"steps"`
	Frames int `json:"frames"`
	// Cycles are those planned; CyclesReached is how many cycles whose frames are all there
	// would be as noisy as the frames used.
	Cycles        int     `json:"cycles"`
	CyclesReached float64 `json:"cycles_reached"`
	// ReadNoise is that measured over the profile's, null where it was not measured.
	ReadNoise *float64 `json:"read_noise"`
	// ThroughputErr is the relative error of a frame's throughput that is left.
	ThroughputErr float64 `json:"throughput_err"`
	// Sky is the light that is not wanted over that forecast, beside all that was wanted;
	// null where it cannot be told.
	Sky *Measured `json:"sky"`
	// Passed is what the reference star says telescope and instrument let pass, over the
	// profile's; null without one.
	Passed *float64 `json:"passed"`
	// Wanted are the measurements in the order of the target's.
	Wanted []Reached `json:"wanted"`
	// Notes are sentences about all of them.
	Notes []string `json:"notes"`
}

// Reached is one measurement.
type Reached struct {
	Name   string  `json:"name"`
	FromNM float64 `json:"from_nm"`
	ToNM   float64 `json:"to_nm"`
	// Plan is the forecast for all that was planned, Taken that for the frames used, the
	// voxels that are good, with their part of the weight, and the error of the frames'
	// throughput that the reduction found.
	Plan  Expected `json:"plan"`
	Taken Expected `json:"taken"`
	Good  float64  `json:"good_fraction"`
	// Signal, Error and SNR are what the cube has, null where no voxel is good. Error is that
	// of the sum, as the plan's sigma; SignalError has that of the light taken off besides.
	Signal      *float64 `json:"signal_e"`
	SignalError *float64 `json:"signal_error_e"`
	Error       *float64 `json:"error_e"`
	SNR         *float64 `json:"snr"`
	// Ratio is SNR over the plan's. It is the product of TimeRatio (Taken's S/N over the
	// plan's), LightRatio (Signal over Taken's) and 1/NoiseRatio (Error over Taken's Sigma).
	// ThroughputRatio is the part of TimeRatio that the error of the frames' throughput has,
	// where the plan expected another one; the rest is that of frames and voxels.
	Ratio           *float64 `json:"ratio"`
	TimeRatio       *float64 `json:"time_ratio"`
	ThroughputRatio *float64 `json:"throughput_ratio"`
	LightRatio      *float64 `json:"light_ratio"`
	LightRatioError *float64 `json:"light_ratio_error"`
	NoiseRatio      *float64 `json:"noise_ratio"`
	// Unwanted is how the light that is not wanted was told, of UnwantedAs; Beside is that
	// light beside the measurement over the forecast's, null where it was not looked at.
	Unwanted UnwantedAs `json:"unwanted"`
	Beside   *Measured  `json:"beside"`
	// ErrorScale is the mean measured error scale of its voxels; Lamps and Throughput are the
	// parts of the error's square that come from the responses and the frames' throughput.
	ErrorScale float64 `json:"error_scale"`
	Lamps      float64 `json:"lamps"`
	Throughput float64 `json:"throughput"`
	// Flags are the parts of the weight whose voxels are not good, by the flags that say so;
	// a voxel may have several.
	Flags []FlagPart `json:"flags,omitempty"`
	// Why says in a sentence what explains Ratio.
	Why string `json:"why"`
}

// FlagPart is the part of a measurement's weight whose voxels have a flag.
type FlagPart struct {
	Name string  `json:"name"`
	Part float64 `json:"part"`
}

// Expected is a forecast of a measurement.
type Expected struct {
	Signal float64 `json:"signal_e"`
	Sigma  float64 `json:"sigma_e"`
	SNR    float64 `json:"snr"`
}

// UnwantedAs is a way of telling the light in a measurement that is not wanted.
type UnwantedAs string

// The ways.
const (
	UnwantedBeside   UnwantedAs = "beside"   // at wavelengths beside a line, in a ring about a band's circle
	UnwantedField    UnwantedAs = "field"    // as beside all others
	UnwantedForecast UnwantedAs = "forecast" // as forecast
	UnwantedNone     UnwantedAs = "none"     // there is none to speak of
)
