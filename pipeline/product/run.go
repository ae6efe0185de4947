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
	Warnings   []string    `json:"warnings"`
	Stages     []Stage     `json:"stages"`
	Exit       int         `json:"exit"`
}

// Input is a file that went in, with the lower-case hex SHA-256 of its bytes.
// Frames are not among them: the ledger lists those.
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
	Hits            *int     `json:"hits"`
	Restored        int      `json:"restored"`
	Lost            int      `json:"lost"`
	WavelengthRMSPx *float64 `json:"wavelength_rms_px"`
	// Saturated and BadPixels count detector pixels.
	Saturated int `json:"saturated"`
	BadPixels int `json:"bad_pixels"`
}

// Stage is one stage of a run: its wall-clock time and the bytes of pixels and tables
// that it read and wrote. The headers of frames are not counted: a stage that reads
// nothing else, such as pair, has 0.
type Stage struct {
	Name    string  `json:"name"`
	Seconds float64 `json:"seconds"`
	Bytes   int64   `json:"bytes"`
}

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
