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
		about: `Nights whose throughput scatters by 5 % and follows a trend of 30 %: of the demo's fields
under the first two of six skies at a raw signal-to-noise ratio of 30, and of the small
fields under all six, at 30 and 100 under the first two and 45 under the others. c is
compared with the truth over all nights (several seeds), the cube with that of a steady
night of the same noise. How well a sky measures c at best follows from its light and the
number of pixels: the error of every estimator is at least the root of the inverse of
S^-1 + H (Cramer and Rao), which at a ratio of 30 is 0.5 % in the small fields of 10000
pixels and 0.4 % in the demo's 65000 with an eighth of the columns dark: c is held against
0.2 % at a ratio of 100, and the cube against a steady night's but where both pixels and
light are few.`,
		run: runThroughput,
	}
}

func runThroughput(ctx context.Context, dir string) ([]trial.Finding, error) {
	list, err := wholeFields(ctx, dir)
	if err != nil {
		return nil, err
	}
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
				more, err := driftFindings(ctx, f, place, name, sn, driftCase{seeds: 40, rich: sky.Rich, bright: sn >= 100})
				if err != nil {
					return list, err
				}
				list = append(list, more...)
			}
		}
	}
	return list, nil
}

// wholeFields makes nights of the demo's fields, at the lowest ratio.
func wholeFields(ctx context.Context, dir string) ([]trial.Finding, error) {
	const sn = 30
	var list []trial.Finding
	for _, at := range [][3]string{{"optical", "demo", "demo"}, {"infrared", "demo-infrared", "demo-infrared"}} {
		for _, sky := range trial.Skies() {
			if !sky.Rich {
				continue
			}
			f, err := trial.Embedded(at[0], at[1], at[2])
			if err != nil {
				return nil, err
			}
			f.Alter(sky)
			place := filepath.Join(dir, fmt.Sprintf("whole-%s-%s", at[0], sky.Name))
			name := fmt.Sprintf("%s, whole device, %s, S/N %d", at[0], sky.Name, sn)
			more, err := driftFindings(ctx, f, place, name, sn, driftCase{seeds: 6, rich: true, manyPixels: true})
			if err != nil {
				return nil, err
			}
			list = append(list, more...)
		}
	}
	return list, nil
}

// driftCase is how many nights are made; whether the sky is rich in light that differs; and
// what then can reach the figures: c where the light is bright, the cube where it is bright
// or pixels are many.
type driftCase struct {
	seeds                    int
	rich, bright, manyPixels bool
}

// driftFindings makes nights of several seeds, one of them with its cube.
func driftFindings(ctx context.Context, f *trial.Field, dir, name string, sn float64, k driftCase) ([]trial.Finding, error) {
	defer os.RemoveAll(dir)
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
	for seed := uint64(1); seed <= uint64(k.seeds); seed++ {
		c := d.C
		if seed > 1 {
			if c, err = night.DriftOnly(ctx, seed, faults...); err != nil {
				return nil, err
			}
		}
		measured += c.Measured * c.Measured / float64(k.seeds)
		predicted += c.Predicted * c.Predicted / float64(k.seeds)
		each.Add(c.Measured * c.Measured / (c.Predicted * c.Predicted))
		frames += c.N
	}
	measured, predicted = math.Sqrt(measured), math.Sqrt(predicted)
	list := []trial.Finding{
		trial.Near(name+": error of c over the predicted one", measured/predicted, 1, 0.2, each.Std()/2/math.Sqrt(float64(k.seeds-1)), frames),
		trial.Below(name+": rms of the cube over that without correction", d.Corrected/d.Raw, 1, d.Pulls.All.N/2),
	}
	errorOfC, rms := name+": error of c", name+": rms of the cube over that of a steady night"
	if !k.rich {
		return append(list, trial.Stated(errorOfC, measured, frames)), nil
	}
	if k.bright {
		list = append(list, trial.Below(errorOfC, measured, 0.002, frames))
	} else {
		list = append(list, trial.Stated(errorOfC, measured, frames))
	}
	if ratio := d.Corrected / d.Steady; k.bright || k.manyPixels {
		list = append(list, trial.Below(rms, ratio, 1.05, d.Pulls.All.N/2))
	} else {
		list = append(list, trial.Stated(rms, ratio, d.Pulls.All.N/2))
	}
	return append(list,
		trial.Near(name+": standard deviation of the pulls", d.Pulls.All.Std(), 1, 0.05, 1/math.Sqrt(float64(d.Pulls.All.N)), d.Pulls.All.N/2),
	), nil
}
