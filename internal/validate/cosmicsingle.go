package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
)

func cosmicSingle() check {
	return check{
		name: "Cosmic rays in single frames (cosmic-single)",
		about: `Cosmic rays found in single frames by their edges, as nights without dark columns need it: the
small square field as a slit scan and with a code of 47 columns, and every fourth science
frame of the demo's night, its instrument other than its profile says. Nights are rehearsed
with and without rays, which tells the struck samples and by how many of their own sigmas;
calib's rule and astroscrappy search the same frames with the same thresholds.
astroscrappy takes no medians on a frame's outer 3 pixels, so the two are compared inside
of them.`,
		run: runCosmicSingle,
	}
}

func runCosmicSingle(ctx context.Context, dir string) ([]trial.Finding, error) {
	var all []trial.Finding
	for i, c := range []struct {
		family                 string
		readNoise, perThousand float64
	}{
		{"slit-scan", 10, 0.2}, {"slit-scan", 10, 5}, {"slit-scan", 150, 5}, {"legendre", 10, 5}, {"legendre", 150, 5},
	} {
		field, err := trial.Square()
		if err != nil {
			return nil, err
		}
		field.Undarken(c.family, c.readNoise)
		what := fmt.Sprintf("%s, read noise %g e, %g struck in 1000", c.family, c.readNoise, c.perThousand)
		findings, err := field.CompareStruck(ctx, filepath.Join(dir, fmt.Sprint(i)), what, uint64(81+i), c.perThousand, 1)
		if err != nil {
			return nil, err
		}
		all = append(all, findings...)
	}
	field, err := trial.Embedded("optical", "demo", "demo")
	if err != nil {
		return nil, err
	}
	field.Imperfect = true
	findings, err := field.CompareStruck(ctx, filepath.Join(dir, "demo"), "demo, 0.5 struck in 1000", 91, 0.5, 4)
	return append(all, findings...), err
}
