package rehearse

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/sequence"
)

// Summary says what Run wrote.
type Summary struct {
	// Frames is the number of files, Lost that of science frames not written.
	Frames int `json:"frames"`
	Lost   int `json:"lost"`
	// Columns and Rows are those of a raw frame.
	Columns int `json:"columns"`
	Rows    int `json:"rows"`
	// Bytes counts the frames' and the truth's samples.
	Bytes int64 `json:"bytes"`
	// SaturatedFraction is the part of the science samples at full well.
	SaturatedFraction float64 `json:"saturated_fraction"`
}

// The files of a night.
const (
	TruthFolder  = "truth"
	TruthFile    = "truth.fits"
	FaultsFile   = "faults.json"
	GeometryFile = "geometry.yaml"
	SceneFile    = "scene.yaml"
	AirFile      = "atmosphere.json"  // with an atmosphere alone
	StarFile     = "refstar_flux.csv" // with refstar steps alone
	scratchFile  = ".frames.scratch"
)

// FrameFile is the name of the frame of step (from 1).
func FrameFile(step int) string { return fmt.Sprintf("f%05d.fits", step) }

// Run rehearses a sequence under a scene and writes the night into the folder
// dir, which must exist and be empty: f00001.fits, f00002.fits ... in the order
// of the steps and truth/. The sequence must be as sequence.Read leaves it, with
// its masks named. progress, where not nil, is called now and then, from one
// goroutine at a time.
//
// Errors name what was wrong and the cure. A folder in which Run failed or was
// cancelled is to be removed.
func Run(ctx context.Context, seq *sequence.Sequence, scene *Scene, opts Options, dir string, progress func(done, total int)) (*Summary, error) {
	if err := opts.complete(); err != nil {
		return nil, err
	}
	if err := checkFaults(opts.Faults, seq); err != nil {
		return nil, err
	}
	if err := scene.Usable(); err != nil {
		return nil, fmt.Errorf("scene: %w", err)
	}
	r, err := newRehearsal(seq, scene, opts)
	if err != nil {
		return nil, err
	}
	r.dir, r.progress = dir, progress
	if err := os.MkdirAll(filepath.Join(dir, TruthFolder), 0o777); err != nil {
		return nil, fmt.Errorf("night: %w; choose a folder that can be written", err)
	}
	if err := r.writeTexts(); err != nil {
		return nil, err
	}
	if err = r.openOutputs(); err == nil {
		err = r.strips(ctx)
	}
	if err == nil {
		err = r.writeFrames(ctx)
	}
	if err := errors.Join(err, r.closeOutputs(err == nil)); err != nil {
		return nil, err
	}
	return r.summary(), nil
}
