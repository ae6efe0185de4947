package main

import (
	"context"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/internal/trial/extraction"
)

func apertures() check {
	return check{
		name: "Errors of apertures",
		about: `200 nights of the square field (47 elements, 48 rows, 108 wavelengths) that differ in
their seed alone, once with sky and a nebula and once with sky and six bright stars. From
each cube the same 20 apertures are extracted: circles, ellipses, polygons and lists, one of
them less its background. The scatter of each of their channels over the nights is compared
with the mean of the squared error that extract quotes, and with that of the naive error,
the root of the sum of VARIANCE; so is a band less the mean of two side bands.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const nights = 200
			var all []trial.Finding
			for _, scene := range []struct {
				name  string
				stars bool
				first uint64
			}{{"extended", false, 20000}, {"stars", true, 30000}} {
				s, err := extraction.MeasureApertures(ctx, filepath.Join(dir, scene.name), scene.stars, nights, scene.first)
				if err != nil {
					return nil, err
				}
				all = append(all, s.Findings(scene.name, extraction.Required(), 1)...)
				all = append(all, trial.MustFail(scene.name+": the same check, errors scaled by 0.95", s.Findings(scene.name, extraction.Required(), 0.95)))
			}
			return all, nil
		},
	}
}
