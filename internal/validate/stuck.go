package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// stuckField is a field whose mirrors do not all move.
type stuckField struct {
	name   string
	make   func() (*trial.Field, error)
	mirror int // of an element
	lamps  bool
}

func stuckMirrors() check {
	return check{
		name: "Stuck mirrors",
		about: `Small fields of both mountings, their devices with 30 mirrors that do not move, on and off
in turn: one in ten outside the field, every fourth of the others on a star. Four nights of
noise for each of three lists, with elements of one, two and six mirrors (or u, mounted
diagonally), and the infrared demo calibrated by its own lamps. Pulls are against the
truth of elements whose mirrors all move, where at least 1 part in 1000 of an element's light
is missing; those above 5 sigma are on stars and lines for the most part.`,
		run: runStuck,
	}
}

func runStuck(ctx context.Context, dir string) ([]trial.Finding, error) {
	wide := func() (*trial.Field, error) {
		f, err := trial.Square()
		if err == nil {
			f.SetCode("m-sequence", 31, 16)
		}
		return f, err
	}
	infrared := func() (*trial.Field, error) {
		f, err := trial.Embedded("infrared", "demo-infrared", "demo-infrared")
		if err == nil {
			f.SetCode("legendre", 83, 16)
			f.Imperfect = true
		}
		return f, err
	}
	var list []trial.Finding
	for _, c := range []stuckField{
		{"square", trial.Square, 2, false}, {"diagonal", trial.Diagonal, 2, false},
		{"square, elements of one mirror", func() (*trial.Field, error) { return trial.Struckable(63, 16) }, 1, false},
		{"diagonal, elements of one u", trial.Diagonal, 1, false},
		{"square, elements of six mirrors", wide, 6, false},
		{"infrared, calibrated by its lamps", infrared, 2, true},
	} {
		pulls := new(trial.StuckPulls)
		lists, nights := 3, 4
		if c.lamps {
			lists, nights = 1, 1
		}
		for k := range lists {
			more, err := c.pulls(ctx, filepath.Join(dir, fmt.Sprint(c.name, k)), uint64(k+1), nights)
			if err != nil {
				return list, fmt.Errorf("%s: %w", c.name, err)
			}
			pulls.Merge(more)
		}
		list = append(list, pulls.Findings(c.name, !c.lamps)...)
	}
	return list, nil
}

// pulls are those of so many nights with one list of stuck mirrors.
func (c *stuckField) pulls(ctx context.Context, dir string, seed uint64, nights int) (*trial.StuckPulls, error) {
	f, err := c.make()
	if err != nil {
		return nil, err
	}
	f.Target.Code.ElementMirrors = c.mirror
	if err := f.Stick(seed, 30); err != nil {
		return nil, err
	}
	night, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	recipe, err := reduce.LoadRecipe(reduce.DefaultRecipe)
	if err != nil {
		return nil, err
	}
	if !c.lamps {
		recipe.Arc.Use, recipe.Flat.Use = "off", "off"
	}
	names := []string{trial.Noisy}
	for k := range nights {
		if k > 0 {
			names = append(names, fmt.Sprint(k))
		}
		if err := night.Rehearse(ctx, names[k], rehearse.Options{Seed: 100*seed + uint64(k), NoTruth: k > 0}); err != nil {
			return nil, err
		}
		result, err := night.Reduce(ctx, names[k], reduce.Options{Cube: true, Recipe: recipe})
		if err != nil {
			return nil, err
		}
		if result.Run.Exit != 0 {
			return nil, fmt.Errorf("a night without a fault is not whole: %v", result.Degraded)
		}
	}
	return night.StuckPullsOf(1, names...)
}
