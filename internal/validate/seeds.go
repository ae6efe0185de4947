package main

import (
	"context"

	"mirrorloom/internal/trial"
)

func seeds() check {
	return check{
		name: "Element variances against the scatter of seeds",
		about: `200 nights of the tiny field (23 elements, 31 code columns, 72 x 16 pixels, sky and stars)
that differ in their seed alone. The scatter of every voxel of the element cube,
dark columns included, over the nights is compared with the mean of its VARIANCE.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const nights, first = 200, 2000
			field, err := trial.Tiny()
			if err != nil {
				return nil, err
			}
			s, err := field.MeasureScatter(ctx, dir, nights, first)
			if err != nil {
				return nil, err
			}
			return append(s.Findings("tiny field", 1),
				trial.AtLeast("element voxels", float64(s.Findings("", 1)[0].N), 3000, nights),
				trial.MustFail("the same check, VARIANCE scaled by 0.9", s.Findings("tiny field", 0.9))), nil
		},
	}
}
