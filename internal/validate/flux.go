package main

import (
	"context"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

func enclosedFlux() check {
	return check{
		name: "Flux",
		about: `A star and a nebula all of whose light lies within the cube: within the grid by a filter,
within the rows by the field's size. Without noise, the sum over the cube is
compared with that over the truth, which is drawn from the scene voxel by voxel
without any pixel in between.`,
		run: runFlux,
	}
}

func runFlux(ctx context.Context, dir string) ([]trial.Finding, error) {
	var all []trial.Finding
	for _, f := range []struct {
		name string
		make func() (*trial.Field, error)
	}{{"square", trial.Square}, {"diagonal", trial.Diagonal}} {
		field, err := f.make()
		if err != nil {
			return nil, err
		}
		field.Enclose()
		night, err := field.Plan(ctx, filepath.Join(dir, f.name))
		if err != nil {
			return nil, err
		}
		if _, err := night.Make(ctx, trial.Twin, rehearse.Options{Noiseless: true}); err != nil {
			return nil, err
		}
		cube, err := trial.ReadCube(night.CubePath(trial.Twin))
		if err != nil {
			return nil, err
		}
		truth, err := cube.ReadTruth(night.TruthPath(trial.Twin))
		if err != nil {
			return nil, err
		}
		all = append(all, trial.FluxFindings(f.name, cube, truth)...)
	}
	return all, nil
}
