package main

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

func skySubtraction() check {
	return check{
		name: "Sky subtraction",
		about: `Small fields of both profiles with two stars and a sky with lines: 36 nights each, reduced
with the sky taken off where a rule found it blank. The mean residual of a night is that of all
good voxels whose places are not among the blank ones, against the truth without its sky;
its standard error is the scatter of the nights. Sums over 4 x 3 and 1 x 9 elements and rows,
of blank places and others, and over bands of wavelengths are compared with the errors of
extract, which know the sky's own. Then the demo of both profiles, an imperfect
instrument calibrated by its lamps: where the sky was found, checked against the scene.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, f := range []struct {
				name string
				make func() (*trial.Field, error)
			}{{"square", trial.Square}, {"diagonal", trial.Diagonal}} {
				found, err := skyNights(ctx, f.name, filepath.Join(dir, f.name), f.make)
				if err != nil {
					return all, err
				}
				all = append(all, found...)
			}
			for _, d := range [][3]string{{"optical", "demo", "demo"}, {"infrared", "demo-infrared", "demo-infrared"}} {
				found, err := skyOfDemo(ctx, filepath.Join(dir, d[0]), d[0], d[1], d[2])
				if err != nil {
					return all, err
				}
				all = append(all, found...)
			}
			return all, nil
		},
	}
}

func skyNights(ctx context.Context, name, dir string, make func() (*trial.Field, error)) ([]trial.Finding, error) {
	const nights, first = 36, 500
	field, err := make()
	if err != nil {
		return nil, err
	}
	field.Scene.Sources = field.Scene.Sources[:2]
	night, err := field.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	recipe, err := reduce.LoadRecipe("nominal")
	if err != nil {
		return nil, err
	}
	recipe.Sky = reduce.SkyRecipe{Use: "auto"}
	middle := night.Seq.Profile.Detector.Rows / 2
	var apertures [][2]string
	for _, j := range []int{4, 12, 20, 28, 36} {
		apertures = append(apertures,
			[2]string{fmt.Sprintf("%d-%d", j, j+3), fmt.Sprintf("%d-%d", middle-6, middle-4)},
			[2]string{fmt.Sprint(j), fmt.Sprintf("%d-%d", middle, middle+8)})
	}
	var residuals trial.SkyResiduals
	var sums trial.SkySums
	for seed := range uint64(nights) {
		night := *night
		label := fmt.Sprintf("sky%d", seed)
		if err := night.Rehearse(ctx, label, rehearse.Options{Seed: first + seed}); err != nil {
			return nil, err
		}
		result, err := night.Reduce(ctx, label, reduce.Options{Cube: true, Recipe: recipe})
		if err != nil {
			return nil, err
		}
		if len(result.Degraded) > 0 {
			return nil, fmt.Errorf("a clean night is not whole: %v", result.Degraded)
		}
		if err := residuals.Add(&night, label); err != nil {
			return nil, err
		}
		if err := sums.Add(ctx, &night, label, apertures); err != nil {
			return nil, err
		}
		if err := night.Discard(label); err != nil {
			return nil, err
		}
	}
	list := residuals.Findings(name)
	// Apertures of a night share its sky, and channels pixels: a night has as many
	// independent channels as every second one, a band of each aperture.
	channels, bands := sums.Channels.N/2, sums.Bands.N
	return append(list,
		trial.Near(name+": standard deviation of the pulls of sums, a channel each", sums.Channels.Std(), 1, 0.05, 1/math.Sqrt(2*float64(channels)), channels),
		trial.Near(name+": the same of sums over bands", sums.Bands.Std(), 1, 0.15, 1/math.Sqrt(2*float64(bands)), bands),
		trial.Stated(name+": the same in units of the naive error, a channel each", sums.Naive.Std(), channels)), nil
}

func skyOfDemo(ctx context.Context, dir, profile, target, scene string) ([]trial.Finding, error) {
	field, err := trial.Embedded(profile, target, scene)
	if err != nil {
		return nil, err
	}
	field.Imperfect = true
	night, err := field.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	if err := night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 1}); err != nil {
		return nil, err
	}
	recipe, err := reduce.LoadRecipe(reduce.DefaultRecipe)
	if err != nil {
		return nil, err
	}
	recipe.Sky = reduce.SkyRecipe{Use: "auto"}
	result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	if err != nil {
		return nil, err
	}
	if len(result.Degraded) > 0 {
		return nil, fmt.Errorf("the demo's night is not whole: %v", result.Degraded)
	}
	list, err := night.BlankFindings("demo, "+profile, trial.Noisy)
	if err != nil {
		return nil, err
	}
	var residuals trial.SkyResiduals
	if err := residuals.Add(night, trial.Noisy); err != nil {
		return nil, err
	}
	return append(list, residuals.Findings("demo, " + profile)[2:]...), nil
}
