package main

import (
	"context"
	"fmt"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

func faintNight() check {
	return check{
		name: "Faint nights",
		about: `Eight nights of the small square field with 0.3 e of sky a sample and nothing else, read
noise 1 e, gain 1 e an ADU: most samples hold less than their noise.`,
		run: runFaint,
	}
}

func runFaint(ctx context.Context, dir string) ([]trial.Finding, error) {
	const nights, first = 8, 31
	field, err := trial.Square()
	if err != nil {
		return nil, err
	}
	night, err := field.FaintPair(ctx, dir, first)
	if err != nil {
		return nil, err
	}
	pulls, _, err := night.PullsOf(1)
	if err != nil {
		return nil, err
	}
	for seed := uint64(first + 1); seed < first+nights; seed++ {
		name := fmt.Sprint(seed)
		if _, err := night.Make(ctx, name, rehearse.Options{Seed: seed, NoTruth: true}); err != nil {
			return nil, err
		}
		more, _, err := night.PullsOfNight(name, 1)
		if err != nil {
			return nil, err
		}
		pulls.Merge(more)
	}
	return pulls.Findings("faint"), nil
}
