package main

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"

	"mirrorloom/hadamard"
	"mirrorloom/internal/trial"
)

func falseAlarms() check {
	return check{
		name: "False alarms of the frame tests",
		about: `Readings of pure noise: G is accumulated over its pixels and every frame tested; an alarm
is the least of the v chances below 1 % / v. The readings' variances are equal, or differ by
up to a factor of 3 in a pattern that differs from pixel to pixel.`,
		run: runFalseAlarms,
	}
}

func runFalseAlarms(ctx context.Context, _ string) ([]trial.Finding, error) {
	const draws, alpha = 25_000, 0.01
	var all []trial.Finding
	for i, x := range []struct {
		v, dark, pixels int
		spread          float32
	}{{31, 10, 40, 0}, {31, 10, 40, 2}, {63, 16, 60, 2}} {
		n, err := countFalseAlarms(ctx, x.v, x.dark, x.pixels, draws, x.spread, alpha, uint64(i))
		if err != nil {
			return nil, err
		}
		what := fmt.Sprintf("share of noise draws with an alarm, v = %d, %d dark, %d pixels, variances 1 to %g", x.v, x.dark, x.pixels, 1+x.spread)
		all = append(all, trial.Near(what, float64(n)/draws, alpha, 0, math.Sqrt(alpha*(1-alpha)/draws), draws))
	}
	return all, nil
}

func countFalseAlarms(ctx context.Context, v, dark, pixels, draws int, spread float32, alpha float64, seed uint64) (int, error) {
	rng := rand.New(rand.NewPCG(2026, seed))
	code, err := hadamard.New(hadamard.MSequence, v)
	if err != nil {
		return 0, err
	}
	set, err := hadamard.ChooseDark(ctx, code, dark, seed)
	if err != nil {
		return 0, err
	}
	checks, err := hadamard.NewChecks(code, set.Columns)
	if err != nil {
		return 0, err
	}
	s2, y := make([]float32, v*pixels), make([]float32, v*pixels)
	for i := range s2 {
		s2[i] = 1 + spread*rng.Float32()
	}
	alarms := 0
	for range draws {
		if err := ctx.Err(); err != nil {
			return 0, err
		}
		for i, s := range s2 {
			y[i] = float32(math.Sqrt(float64(s)) * rng.NormFloat64())
		}
		g := hadamard.NewGram(v)
		g.Add(y, s2, pixels, pixels, 0)
		least := 0.0
		for _, x := range checks.FrameTests(g) {
			least = min(least, x.LogP)
		}
		if least < hadamard.FalseAlarm(alpha, v) {
			alarms++
		}
	}
	return alarms, nil
}
