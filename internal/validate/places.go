package main

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

// placeFindings asks testdata/crosscheck/reduce_wcs.py, which says how, for the
// places of the stars and lines in the cubes of the night and of its twin without noise.
// The latter are held against a tenth of a voxel: the farthest of a score of centroids
// in noise says more of the noise.
func placeFindings(ctx context.Context, name string, night *trial.Night) ([]trial.Finding, error) {
	const limit = 0.1 // voxels
	clean, err := placesOf(ctx, name, night, trial.Twin)
	if err != nil {
		return nil, err
	}
	noisy, err := placesOf(ctx, name, night, trial.Noisy)
	if err != nil {
		return nil, err
	}
	return []trial.Finding{
		trial.Below(name+", no noise: farthest star from its place, elements", clean.StarX, limit, clean.Stars),
		trial.Below(name+", no noise: farthest star from its place, rows", clean.StarY, limit, clean.Stars),
		trial.Below(name+", no noise: farthest line from its wavelength, voxels", clean.Line, limit, clean.Lines),
		trial.Below(name+": farthest star from its place, elements", noisy.StarX, limit, noisy.Stars),
		trial.Below(name+": farthest star from its place, rows", noisy.StarY, limit, noisy.Stars),
		trial.Stated(name+": farthest line from its wavelength, voxels", noisy.Line, noisy.Lines),
	}, nil
}

// places is how far stars and lines lie from where they should, voxels.
type places struct {
	Stars int
	Lines int
	StarX float64 `json:"star_x"`
	StarY float64 `json:"star_y"`
	Line  float64
}

func placesOf(ctx context.Context, name string, night *trial.Night, which string) (*places, error) {
	t := night.Field.Target
	text, err := json.Marshal([]map[string]any{{
		"name": name, "cube": night.CubePath(which),
		"scene": filepath.Join(night.Frames(trial.Noisy), rehearse.TruthFolder, rehearse.SceneFile),
		"ra":    t.RADeg, "dec": t.DecDeg, "lsf_voxels": night.Field.Profile.Spectrograph.LSFFWHMPx,
	}})
	if err != nil {
		return nil, err
	}
	list := filepath.Join(night.Dir, which+"-places.json")
	if err := os.WriteFile(list, text, 0o644); err != nil {
		return nil, err
	}
	cmd := exec.CommandContext(ctx, "/usr/bin/python3", filepath.Join("testdata", "crosscheck", "reduce_wcs.py"), list)
	cmd.Env = append(os.Environ(), "OPENBLAS_NUM_THREADS=1", "PYTHONDONTWRITEBYTECODE=1")
	cmd.Stderr = os.Stderr
	answer, err := cmd.Output()
	if err != nil {
		return nil, fmt.Errorf("reduce_wcs.py, which needs Debian's python3-astropy and python3-scipy and the module's top folder: %w", err)
	}
	p := new(places)
	if err := json.Unmarshal(answer, p); err != nil {
		return nil, fmt.Errorf("reduce_wcs.py: %w", err)
	}
	return p, nil
}
