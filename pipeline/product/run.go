package product

import (
	"encoding/json"
	"fmt"
	"io"
	"os"
)

// RunSchema is the version of run.json's form.
const RunSchema = 1

// Run is run.json: what was done with what, how good it is and what it cost.
// It and report.html are the only products that hold times.
type Run struct {
	Schema   int            `json:"schema"`
	Version  string         `json:"version"`
	CPULevel string         `json:"cpu_level"`
	Inputs   []Input        `json:"inputs"`
	Settings map[string]any `json:"settings"`
	Quality  Quality        `json:"quality"`
	// Calibration is what was measured of the instrument; nil if nothing was.
	Calibration *Calibration `json:"calibration,omitempty"`
	// Throughput is what was found of the frames' throughput; nil if it was not asked
	// for.
	Throughput *Throughput `json:"throughput,omitempty"`
	// Stars is what listed stars told of the place on the sky; nil if none were listed or
	// they were not found.
	Stars *Stars `json:"stars,omitempty"`
	// Sky is what was subtracted of the sky; nil if nothing was.
	Sky *SkyReport `json:"sky,omitempty"`
	// Flux is what the reference star told; nil for a cube in counts.
	Flux *FluxReport `json:"flux,omitempty"`
	// Forecast is the plan's forecast beside what was reached; nil if the target has none, or
	// without a cube.
	Forecast *Forecast `json:"forecast,omitempty"`
	// Combined are the runs that were combined; nil for a reduction.
	Combined Members `json:"combined,omitempty"`
	// FieldShift says where in the field the light of the voxels was taken; nil at their
	// own places.
	FieldShift *FieldShiftSection `json:"field_shift,omitempty"`
	// Audit is what the audit found of the pairing of frames; nil without one.
	Audit    any      `json:"audit,omitempty"`
	Warnings []string `json:"warnings"`
	Stages   []Stage  `json:"stages"`
	Exit     int      `json:"exit"`
}

// ExitDegraded is Exit of a product that was written but is not whole.
const ExitDegraded = 3

// Input is a file that went in, with the lower-case hex SHA-256 of its bytes.
// Frames are not among them: the ledger lists those. Of a cube.fits it is what Identify
// gives.
type Input struct {
	File   string `json:"file"`
	SHA256 string `json:"sha256"`
}

// Quality holds the figures that say whether the cube can be trusted. A figure
// that was not measured is nil and null in the file.
type Quality struct {
	// GoodFraction is the part of all voxels that are good; CoveredGoodFraction
	// that of the voxels in coded rows whose wavelength falls on the detector.
	GoodFraction        float64 `json:"good_fraction"`
	CoveredGoodFraction float64 `json:"covered_good_fraction"`
	// DarkChi2Heldout is the mean over detector rows, by their number of good
	// pixels, of sum(x^2)/sum(V) over the good pixels' dark decodes x and their
	// variances V, from columns that no fit has seen: 1 if all is well.
	DarkChi2Heldout *float64 `json:"dark_chi2_heldout"`
	ThroughputRMS   *float64 `json:"throughput_rms"`
	ThroughputErr   *float64 `json:"throughput_err"`
	// Hits counts the samples that cosmic rays struck and that were restored,
	// DoubtfulPixels the pixels voided because it cannot be told which were struck.
	Hits            *int     `json:"hits"`
	DoubtfulPixels  int      `json:"doubtful_pixels"`
	Restored        int      `json:"restored"`
	Lost            int      `json:"lost"`
	WavelengthRMSPx *float64 `json:"wavelength_rms_px"`
	// Restored counts the samples, pixel by code row, whose reading was restored from
	// the dark columns: those of code rows without a frame on the whole detector, and
	// struck ones pixel by pixel. RestoredGrowth is by what restoring lost rows
	// multiplied the noise, null where none is lost.
	RestoredGrowth *float64 `json:"restored_growth"`
	// ErrorScale is the scatter of the dark decodes over what VARIANCE says.
	ErrorScale *ErrorScale `json:"error_scale"`
	// ResidualLight says how light that comes without open mirrors was taken off.
	ResidualLight ResidualLight `json:"residual_light"`
	// DarkChi2Steps is the chi-square of each science step's part in the dark decodes,
	// in the order of the steps; null where nothing is restored. Steps that show the
	// same mask share theirs.
	DarkChi2Steps []StepChi2 `json:"dark_chi2_steps"`
	// Flags count voxels by their flags; empty without a cube.
	Flags []FlagCount `json:"flags,omitempty"`
	// DarkPulls is how the dark decodes scatter in units of their errors; nil without.
	DarkPulls *DarkPulls `json:"dark_pulls,omitempty"`
	// Saturated and BadPixels count detector pixels.
	Saturated int `json:"saturated"`
	BadPixels int `json:"bad_pixels"`
}

// ErrorScale sums up the measured error scale q over the detector's pixels.
type ErrorScale struct {
	Mean float64 `json:"mean"`
	Max  float64 `json:"max"`
	// Applied is the part of the pixels where it is above 1 beyond chance, so that
	// VARIANCE was multiplied by it.
	Applied float64 `json:"applied"`
	// Map holds its mean in stretches of equal size, [row][column] from the detector's
	// first pixel; null where nothing was measured.
	Map [][]*float64 `json:"map"`
}

// StepChi2 is how much of a step's frame the dark columns do not explain: 1 is noise.
// It is null where they do not see the step.
type StepChi2 struct {
	Step int      `json:"step"`
	Chi2 *float64 `json:"chi2"`
}

// ResidualLight is a way of taking off light that comes without open mirrors.
type ResidualLight string

// The ways.
const (
	ByAllOff ResidualLight = "all-off frames"
	ByDark   ResidualLight = "dark columns"
	NotTaken ResidualLight = "none"
)

// Write writes run.json's text.
func (r *Run) Write(w io.Writer) error {
	enc := json.NewEncoder(w)
	enc.SetIndent("", "  ")
	if err := enc.Encode(r); err != nil {
		return fmt.Errorf("write %s: %w", RunFile, err)
	}
	return nil
}

// ReadRun reads a run.json.
func ReadRun(path string) (*Run, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("open %s: %w", RunFile, err)
	}
	r := new(Run)
	if err := json.Unmarshal(data, r); err != nil {
		return nil, fmt.Errorf("%s: %w; make it again with reduce", path, err)
	}
	if r.Schema != RunSchema {
		return nil, fmt.Errorf("%s: schema %d, want %d; make it again with reduce", path, r.Schema, RunSchema)
	}
	return r, nil
}
