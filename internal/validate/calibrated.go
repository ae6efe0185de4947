package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
)

// calibratedNight compares an imperfect night of the embedded configurations,
// calibrated by its own lamps, with its truth. The lines are the brightest of the
// scene's nebula that stand alone.
func calibratedNight(profile, target, scene string, linesNM ...float64) check {
	const seed = 1
	return check{
		name: "Calibrated night of the demo, " + profile,
		about: fmt.Sprintf(`The target "%s" with the scene "%s" on the profile "%s": the rehearsed instrument
differs from the profile by up to 15 px, 2 %% of the dispersion, 3 px of smile, a degree
of slit tilt and 5 px of trace tilt; its pixels, slit and light path respond unevenly;
its lamps lack lines and have unknown ones. The default recipe calibrates it. Lines are
Gaussians fitted in every spectrum where the nebula's line stands 10 sigmas above the
noise, to the cube and to the truth alike.`, target, scene, profile),
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			field, err := trial.Embedded(profile, target, scene)
			if err != nil {
				return nil, err
			}
			night, result, err := field.Calibrated(ctx, filepath.Join(dir, profile), seed)
			if err != nil {
				return nil, err
			}
			list, err := night.CalibratedFindings(profile, linesNM)
			if err != nil {
				return nil, err
			}
			return append(list,
				trial.AtLeast(profile+": good part of the covered voxels", result.Run.Quality.CoveredGoodFraction, 0.99, night.Seq.N()),
				trial.Below(profile+": rms of the arc lines, px", result.Run.Calibration.Arcs.RMSPx, 0.05, result.Run.Calibration.Arcs.Lines)), nil
		},
	}
}
