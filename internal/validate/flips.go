package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

func flips() check {
	return check{
		name: "Nights whose masks are all flipped",
		about: `20 nights of the small field with lamps, the instrument not quite the profile's, every
mask flipped along the dispersion. The dark columns stay dark; the arcs' direction has
to name the flip, and the run to end with exit code 3.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const nights = 20
			field, err := trial.Lamps()
			if err != nil {
				return nil, err
			}
			n, err := field.Plan(ctx, dir)
			if err != nil {
				return nil, err
			}
			named := 0
			for seed := range uint64(nights) {
				name := fmt.Sprint(seed)
				r, err := n.Make(ctx, name, rehearse.Options{Seed: 400 + seed, NoTruth: true, Faults: []rehearse.Fault{{Name: rehearse.Flip}}})
				if err != nil {
					return nil, err
				}
				if len(r.Degraded) > 0 && strings.Contains(strings.Join(r.Degraded, " "), "every mask flipped") {
					named++
				} else {
					fmt.Fprintf(os.Stderr, "seed %d: %v\n", 400+seed, r.Degraded)
				}
				for _, folder := range []string{n.Frames(name), n.Run(name)} {
					if err := os.RemoveAll(filepath.Clean(folder)); err != nil {
						return nil, err
					}
				}
			}
			return []trial.Finding{trial.AtLeast("nights named", float64(named), nights, nights)}, nil
		},
	}
}
