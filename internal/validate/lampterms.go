package main

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// lampTerms measures the neighbour term and the contrast on noisy nights that have
// both.
func lampTerms() check {
	return check{
		name: "Neighbour term and contrast",
		about: `Imperfect nights of both profiles with noise, a neighbour term of 1 % at the band's
centre, in proportion to the wavelength, and a leak of 3e-4 with a structure of 20 %,
mirrors outside the field included. The lamp frames measure both. A neighbour term that
is off by e leaves ghosts of e/4 of a star in an m-sequence.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, c := range [][2]string{{"optical", "demo"}, {"infrared", "demo-infrared"}} {
				list, err := measureLampTerms(ctx, filepath.Join(dir, c[0]), c[0], c[1])
				if err != nil {
					return nil, err
				}
				all = append(all, list...)
			}
			return all, nil
		},
	}
}

func measureLampTerms(ctx context.Context, dir, profile, name string) ([]trial.Finding, error) {
	const d, leak = 0.01, 3e-4
	f, err := trial.Embedded(profile, name, name)
	if err != nil {
		return nil, err
	}
	f.Imperfect, f.Target.Code.Cycles = true, 1
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	faults := []rehearse.Fault{{Name: rehearse.Neighbour, Size: d}, {Name: rehearse.Leak, Size: leak}}
	if err := n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true, Faults: faults}); err != nil {
		return nil, err
	}
	r, err := n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	if err != nil {
		return nil, err
	}
	c := r.Run.Calibration
	if c == nil || len(c.Neighbour) == 0 || len(c.Contrast) == 0 {
		return nil, fmt.Errorf("%s: the lamp measured no neighbour term or no contrast: %v", profile, r.Degraded)
	}
	var ghost, contrast, mean float64
	for _, at := range c.Neighbour {
		truth := d * at.WavelengthNM / f.Profile.Spectrograph.CenterNM
		ghost = max(ghost, math.Abs(at.Value-truth)/4)
	}
	for _, at := range c.Contrast {
		contrast = max(contrast, math.Abs(at.Value*leak-1))
		mean += at.Value * leak / float64(len(c.Contrast))
	}
	what := profile + ": contrast over the truth's, mean of the band"
	judged := trial.Near(what, mean, 1, 0.03, 0, len(c.Contrast))
	if f.Profile.DMD.Mounting == instrument.Diagonal {
		judged = trial.Stated(what, mean, len(c.Contrast))
	}
	return []trial.Finding{
		trial.Below(profile+": largest ghost left of a star, of its light", ghost, 2e-4, len(c.Neighbour)),
		judged,
		trial.Stated(profile+": contrast, largest error, at an end of the band", contrast, len(c.Contrast)),
	}, nil
}
