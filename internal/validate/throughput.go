package main

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/rehearse"
)

func throughput() check {
	return check{
		name: "throughput by dark columns",
		about: `Nights of the small fields whose throughput scatters by 5 % and follows a trend of 30 %,
under six skies, at a raw signal-to-noise ratio of 30 and 100 under the first two and of 45
under the others. c is compared with the truth over all nights, the cube with that of a
steady night of the same noise. How well a sky measures c at best follows from its light:
the error of every estimator is at least the root of the inverse of S^-1 + H (Cramer and
Rao), which at a ratio of 30 is above 0.2 % in these fields of 10000 pixels; there the
error is stated.`,
		run: runThroughput,
	}
}

func runThroughput(ctx context.Context, dir string) ([]trial.Finding, error) {
	var list []trial.Finding
	for _, field := range []struct {
		name string
		make func() (*trial.Field, error)
	}{{"optical", trial.Square}, {"infrared", trial.Diagonal}} {
		for _, sky := range trial.Skies() {
			ratios := []float64{45}
			if sky.Rich {
				ratios = []float64{30, 100}
			}
			for _, sn := range ratios {
				f, err := field.make()
				if err != nil {
					return nil, err
				}
				f.Show(sky)
				place := filepath.Join(dir, fmt.Sprintf("%s-%s-%g", field.name, sky.Name, sn))
				name := fmt.Sprintf("%s, %s, S/N %g", field.name, sky.Name, sn)
				more, err := driftFindings(ctx, f, place, name, sn, sky.Rich)
				if err != nil {
					return list, err
				}
				list = append(list, more...)
				if err := os.RemoveAll(place); err != nil {
					return nil, err
				}
			}
		}
	}
	return list, nil
}

// driftFindings makes nights of several seeds, one of them with its cube.
func driftFindings(ctx context.Context, f *trial.Field, dir, name string, sn float64, rich bool) ([]trial.Finding, error) {
	const seeds = 4
	if err := f.Expose(ctx, filepath.Join(dir, "bright"), sn); err != nil {
		return nil, err
	}
	night, err := f.Plan(ctx, filepath.Join(dir, "night"))
	if err != nil {
		return nil, err
	}
	faults := []rehearse.Fault{{Name: rehearse.Drift, Size: 0.05}, {Name: rehearse.Trend, Size: 0.3}}
	var measured, predicted float64
	var each trial.Moments // of the nights' ratios of squares
	frames := 0
	d, err := night.Drift(ctx, 1, faults...)
	if err != nil {
		return nil, err
	}
	for seed := uint64(1); seed <= seeds; seed++ {
		c := d.C
		if seed > 1 {
			if c, err = night.DriftOnly(ctx, seed, faults...); err != nil {
				return nil, err
			}
		}
		measured += c.Measured * c.Measured / seeds
		predicted += c.Predicted * c.Predicted / seeds
		each.Add(c.Measured * c.Measured / (c.Predicted * c.Predicted))
		frames += c.N
	}
	measured, predicted = math.Sqrt(measured), math.Sqrt(predicted)
	list := []trial.Finding{
		trial.Near(name+": error of c over the predicted one", measured/predicted, 1, 0.2, each.Std()/2/math.Sqrt(seeds-1), frames),
		trial.Below(name+": rms of the cube over that without correction", d.Corrected/d.Raw, 1, d.Pulls.All.N/2),
	}
	if !rich {
		return append(list, trial.Stated(name+": error of c", measured, frames)), nil
	}
	if sn >= 100 {
		list = append(list, trial.Below(name+": error of c", measured, 0.002, frames))
	} else {
		list = append(list, trial.Stated(name+": error of c", measured, frames))
	}
	return append(list,
		trial.Below(name+": rms of the cube over that of a steady night", d.Corrected/d.Steady, 1.05, d.Pulls.All.N/2),
		trial.Near(name+": standard deviation of the pulls", d.Pulls.All.Std(), 1, 0.05, 1/math.Sqrt(float64(d.Pulls.All.N)), d.Pulls.All.N/2),
	), nil
}
