package main

import (
	"context"
	"fmt"

	"mirrorloom/internal/trial"
)

// demoNight compares a night of the embedded configurations with its truth; good is
// the part of all voxels that must be good, 0 to state it only.
func demoNight(profile, target, scene string, good float64) check {
	return check{
		name: "Night of the demo, " + profile,
		about: fmt.Sprintf(`The target "%s" with the scene "%s" on the profile "%s", a perfect instrument, rehearsed
with and without noise and reduced with the default recipe. Pulls are (cube -
truth)/sigma of good voxels; the deciles are those of the counts of the detector
pixels, which VARIANCE of the night without noise tells. Places are found through
astropy's WCS.`, target, scene, profile),
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			return runDemo(ctx, dir, profile, target, scene, good)
		},
	}
}

func runDemo(ctx context.Context, dir, profile, target, scene string, good float64) ([]trial.Finding, error) {
	const seed = 1
	field, err := trial.Embedded(profile, target, scene)
	if err != nil {
		return nil, err
	}
	night, reduction, err := field.Pair(ctx, dir, seed)
	if err != nil {
		return nil, err
	}
	if len(reduction.Degraded) > 0 {
		return nil, fmt.Errorf("a clean night is not whole: %v", reduction.Degraded)
	}
	pulls, cube, err := night.PullsOf(1)
	if err != nil {
		return nil, err
	}
	findings := append(pulls.Findings(profile), trial.GoodFindings(profile, cube, night.Seq, good)...)
	small, _, err := night.PullsOf(0.9)
	if err != nil {
		return nil, err
	}
	findings = append(findings, trial.MustFail(profile+": the pulls' check, VARIANCE scaled by 0.9", small.Findings(profile)))
	if findings, err = addDarkColumns(findings, profile, night, reduction.Run.Quality.DarkChi2Heldout); err != nil {
		return nil, err
	}
	more, err := noiselessFindings(profile, night)
	if err != nil {
		return nil, err
	}
	findings = append(findings, more...)
	places, err := placeFindings(ctx, profile, night)
	return append(findings, places...), err
}

// addDarkColumns adds the mean square of the dark columns' decodes: 1 within 2 %,
// which a VARIANCE 2 % off would take it to.
func addDarkColumns(findings []trial.Finding, name string, night *trial.Night, chi2 *float64) ([]trial.Finding, error) {
	if chi2 == nil {
		return nil, fmt.Errorf("%s: the dark columns were not measured", name)
	}
	d := night.Seq.Profile.Detector
	n := len(night.Seq.DarkColumns()) * d.Columns * d.Rows
	return append(findings, trial.Near(name+": chi-square of the dark columns", *chi2, 1, 0.02, 0, n)), nil
}

func noiselessFindings(name string, night *trial.Night) ([]trial.Finding, error) {
	cube, err := trial.ReadCube(night.CubePath(trial.Twin))
	if err != nil {
		return nil, err
	}
	truth, err := cube.ReadTruth(night.TruthPath(trial.Noisy))
	if err != nil {
		return nil, err
	}
	return trial.InterpolationFindings(name+", no noise", cube, truth), nil
}
