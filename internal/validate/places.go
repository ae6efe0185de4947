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
// places of the stars and lines of the noisy night's cube.
func placeFindings(ctx context.Context, name string, night *trial.Night) ([]trial.Finding, error) {
	const limit = 0.1 // voxels
	t := night.Field.Target
	text, err := json.Marshal([]map[string]any{{
		"name": name, "cube": night.CubePath(trial.Noisy),
		"scene": filepath.Join(night.Frames(trial.Noisy), rehearse.TruthFolder, rehearse.SceneFile),
		"ra":    t.RADeg, "dec": t.DecDeg, "lsf_voxels": night.Field.Profile.Spectrograph.LSFFWHMPx,
	}})
	if err != nil {
		return nil, err
	}
	list := filepath.Join(night.Dir, "places.json")
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
	var p struct {
		Stars int
		Lines int
		StarX float64 `json:"star_x"`
		StarY float64 `json:"star_y"`
		Line  float64
	}
	if err := json.Unmarshal(answer, &p); err != nil {
		return nil, fmt.Errorf("reduce_wcs.py: %w", err)
	}
	return []trial.Finding{
		trial.Below(name+": farthest star from its place, elements", p.StarX, limit, p.Stars),
		trial.Below(name+": farthest star from its place, rows", p.StarY, limit, p.Stars),
		trial.Below(name+": farthest line from its wavelength, voxels", p.Line, limit, p.Lines),
	}, nil
}
