package forecast

import (
	"math"

	"mirrorloom/pipeline/sequence"
)

// Result is what a candidate will give.
type Result struct {
	Candidate Candidate `json:"candidate"`
	Time      Time      `json:"time"`
	// Airmass is the mean over the science steps; 0 below the horizon.
	Airmass float64 `json:"airmass"`
	// Wanted are the measurements in the order of the target's.
	Wanted     []Measure  `json:"wanted"`
	Saturation Saturation `json:"saturation"`
	// ThroughputRMS is the scatter of the frames' transmission that is left: what the
	// target says, or what dark columns leave of it.
	ThroughputRMS float64 `json:"throughput_rms"`
	// Slit is the slit scan of the same elements in the same science time; nil where
	// reading and loading alone take longer, and for a slit scan itself.
	Slit *Slit `json:"slit_scan,omitempty"`
}

// Slit is the slit scan that a candidate is held against.
type Slit struct {
	// Candidate has the dwell that fills the time, in as few cycles as saturation allows.
	Candidate  Candidate  `json:"candidate"`
	Wanted     []Measure  `json:"wanted"`
	Saturation Saturation `json:"saturation"`
}

// Measure is the forecast of one measurement.
type Measure struct {
	Name string `json:"name"`
	// Line tells whether it is of a line, not of a band.
	Line bool `json:"line"`
	// FromNM and ToNM bound the wavelengths added up, vacuum nm.
	FromNM float64 `json:"from_nm"`
	ToNM   float64 `json:"to_nm"`
	// Voxels is how many are added up, those cut by the aperture or the band in part.
	Voxels float64 `json:"voxels"`
	// Signal is the light wanted, Sigma the standard deviation of the sum over its voxels,
	// electrons in one science exposure (as the cube's); SNR is their ratio.
	Signal float64 `json:"signal_e"`
	Sigma  float64 `json:"sigma_e"`
	SNR    float64 `json:"snr"`
	// VoxelSNR is the mean S/N of a voxel.
	VoxelSNR float64 `json:"voxel_snr"`
	// Variance says where Sigma's square comes from, in parts of 1.
	Variance Parts `json:"variance"`
	// Levels is Variance.Level by the frames that it comes from, in the same parts.
	Levels Levels `json:"levels"`
	// ResponseSigma is what Sigma would be if nothing but the pixels' response were wrong,
	// in each pixel by 1 %, at random: electrons. Flats make it smaller.
	ResponseSigma float64 `json:"sigma_of_1_percent_response_e"`
	// Spectrum is the S/N along the wavelengths.
	Spectrum []Channel `json:"spectrum"`
	// Electrons are those of a mean pixel of these voxels.
	Electrons Electrons `json:"electrons"`
}

// Parts of a variance, 1 in all.
type Parts struct {
	// Photons is that of all light that overlaps, Detector read noise and rounding, Dark
	// the dark current, Leak the light of closed mirrors, Level what is taken off all
	// frames, Throughput the scatter of the transmission.
	Photons    float64 `json:"photons"`
	Detector   float64 `json:"detector"`
	Dark       float64 `json:"dark"`
	Leak       float64 `json:"leak"`
	Level      float64 `json:"level"`
	Throughput float64 `json:"throughput"`
}

// Levels are parts of a variance that come from what is taken off all frames.
type Levels struct {
	// Bias, Dark and AllOff are from frames of these kinds, DarkColumns from dark columns
	// that stand for all-off frames.
	Bias        float64 `json:"bias"`
	Dark        float64 `json:"dark"`
	AllOff      float64 `json:"all_off"`
	DarkColumns float64 `json:"dark_columns"`
}

func (l *Levels) total() float64 { return l.Bias + l.Dark + l.AllOff + l.DarkColumns }

func (l *Levels) add(times float64, o *Levels) {
	l.Bias += times * o.Bias
	l.Dark += times * o.Dark
	l.AllOff += times * o.AllOff
	l.DarkColumns += times * o.DarkColumns
}

func (l *Levels) scale(by float64) {
	l.Bias, l.Dark, l.AllOff, l.DarkColumns = by*l.Bias, by*l.Dark, by*l.AllOff, by*l.DarkColumns
}

// Channel is a wavelength of a measurement.
type Channel struct {
	// WavelengthNM is the middle of the voxels, vacuum nm; VoxelSNR the mean S/N of those
	// added up there.
	WavelengthNM float64 `json:"wavelength_nm"`
	VoxelSNR     float64 `json:"voxel_snr"`
}

// Electrons in one science exposure at a pixel.
type Electrons struct {
	// Wanted is the light wanted, Own all light of the element when it is open, Overlap
	// that of all elements together, Frame what a frame holds in the mean, dark current
	// and leak included.
	Wanted  float64 `json:"wanted"`
	Own     float64 `json:"own"`
	Overlap float64 `json:"overlap"`
	Frame   float64 `json:"frame"`
}

// Saturation is about the brightest pixel of the coded frames.
type Saturation struct {
	// Electrons are those of the pixel in the brightest mask that is to be expected, Limit
	// those at which its amplifier saturates.
	Electrons float64 `json:"electrons"`
	Limit     float64 `json:"limit"`
	// Column and Row are the pixel's, active pixels from 0.
	Column int `json:"column"`
	Row    int `json:"row"`
	// Source is the index of the source that gives most of it, -1 for the sky.
	Source int `json:"source"`
	// SourceFraction is its part.
	SourceFraction float64 `json:"source_fraction"`
	// LongestDwellSeconds is the dwell at which the pixel saturates; 0 where there is no
	// light and no dark current.
	LongestDwellSeconds float64 `json:"longest_dwell_s"`
}

// Saturated tells whether the brightest pixel is.
func (s Saturation) Saturated() bool { return s.Electrons >= s.Limit }

// Figure is what a choice raises, by the target's aim: the least S/N, the mean, or that of
// the measurement named. NaN of nothing wanted.
func Figure(aim string, wanted []Measure) float64 {
	least, sum := math.Inf(1), 0.0
	for _, m := range wanted {
		if m.Name == aim {
			return m.SNR
		}
		least, sum = min(least, m.SNR), sum+m.SNR
	}
	switch {
	case len(wanted) == 0:
		return math.NaN()
	case aim == sequence.AimMean:
		return sum / float64(len(wanted))
	}
	return least
}
