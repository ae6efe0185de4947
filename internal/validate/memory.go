package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/child"
	"mirrorloom/internal/trial"
)

// program is the command as `make build` leaves it.
const program = "bin/mirrorloom"

// peakMemory must come first among the checks: see package child.
func peakMemory() check {
	return check{
		name: "Memory",
		about: `A night of 255 science frames of 2048 x 2048 and 21 calibration frames, 2.4 GB, reduced by
the command as built with --memory 512MiB to a cube of 8.2 GB, and to the cube and
the element cube. The peak is the largest resident memory of the process
(ru_maxrss).`,
		run: runPeakMemory,
	}
}

func runPeakMemory(ctx context.Context, dir string) ([]trial.Finding, error) {
	in := func(name string) string { return filepath.Join(dir, name) }
	given := func(name string) string { return filepath.Join("testdata", "large", name) }
	for _, args := range [][]string{
		{"plan", given("target.yaml"), "--profile", given("profile.yaml"), "-o", in("sequence")},
		{"rehearse", in("sequence"), "--scene", given("scene.yaml"), "--seed", "1", "--perfect", "--no-truth", "-o", in("night")},
	} {
		if _, err := child.Run(ctx, program, args...); err != nil {
			return nil, err
		}
	}
	// The night has no arcs and no coded flats: the recipe is "nominal".
	var all []trial.Finding
	for _, products := range []string{"cube", "cube,elements"} {
		u, err := child.Run(ctx, program, "reduce", in("night"), "--sequence", in("sequence"), "--recipe", "nominal", "--memory", "512MiB", "--products", products, "-o", in("run"), "--replace")
		if err != nil {
			return nil, err
		}
		const most = 512 << 20
		all = append(all, trial.Finding{
			What: fmt.Sprintf("peak memory, --products %s", products), Required: "<= 512 MiB",
			Measured: fmt.Sprintf("%.1f MiB", float64(u.PeakBytes)/(1<<20)), N: 1, OK: u.PeakBytes <= most,
		})
	}
	return all, nil
}
