package main

import (
	"context"
	"fmt"

	"mirrorloom/internal/trial"
	"mirrorloom/internal/trial/extraction"
	"mirrorloom/pipeline/extract"
)

func lineMaps() check {
	return check{
		name: "Maps of lines",
		about: `The demo's night, of an imperfect instrument calibrated by its lamps. Lines of the ring
are fitted in the spectrum of every element and row, and with the same model in the truth:
oxygen's two lines with one velocity and width, and with their own; the blend of hydrogen
and nitrogen with one. Pulls are (fit - fit of the truth)/error, of the flux where the
truth's is above 5 of its errors, of velocity and width above 10. Velocities are fitted by
a plane, weighted by their errors, in both.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			field, err := trial.Embedded("optical", "demo", "demo")
			if err != nil {
				return nil, err
			}
			night, _, err := field.Calibrated(ctx, dir, 1)
			if err != nil {
				return nil, err
			}
			var all []trial.Finding
			for _, c := range []struct {
				name    string
				options extract.LineOptions
				judged  int // so many lines are strong enough
			}{
				{"tied", extract.LineOptions{RestNM: []float64{500.824, 496.030}}, 2},
				{"free", extract.LineOptions{RestNM: []float64{500.824, 496.030}, Free: true}, 1},
				{"tied blend", extract.LineOptions{RestNM: []float64{656.461, 658.527, 654.986}}, 2},
			} {
				pulls, err := extraction.MeasureLines(ctx, night.Run(trial.Noisy), night.TruthPath(trial.Noisy), c.options)
				if err != nil {
					return nil, err
				}
				for i := range pulls[:c.judged] {
					all = append(all, pulls[i].Findings(fmt.Sprintf("%s, %.2f nm", c.name, c.options.RestNM[i]))...)
				}
			}
			return all, nil
		},
	}
}
