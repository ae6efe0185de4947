package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
)

func readNoiseGain() check {
	return check{
		name: "Gain over the slit scan where read noise is all",
		about: `A coded night and a slit scan of the same elements without any light, rehearsed and
reduced by the same code. Both have the same total exposure: v frames of a code
with g dark columns are n/v as long as the n of the slit scan, n = v - g. The
gain is the ratio of the scatter of good voxels over the exposure of a frame;
predicted is (v+1)/(2 sqrt v) n/v.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, c := range []struct{ v, dark int }{{31, 0}, {31, 8}, {127, 0}, {127, 16}} {
				sub := filepath.Join(dir, fmt.Sprintf("%d-%d", c.v, c.dark))
				g, err := trial.MeasureGain(ctx, sub, c.v, c.dark, uint64(1000*c.v+c.dark))
				if err != nil {
					return nil, err
				}
				all = append(append(all, g.Finding()), g.PullFindings()...)
			}
			return all, nil
		},
	}
}
