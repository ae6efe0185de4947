package main

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

func onSky() check {
	return check{
		name: "On the sky, in units of flux",
		about: `A field of five stars from red to blue, 400 to 900 nm, that culminates at an air mass of 1.5
while its science frames are taken, under an air that dims and bends as the site's does: 4 nights,
reduced with the sky taken off, refraction taken out and counts turned into flux by the
cube of a reference star, observed at an air mass of 1.15 in another night. The flux of
each star within 3 arc seconds is compared with the scene's above the air, in five bands and all
nights together, and its centre of light in each band with its place. Pulls are those of
all good voxels against the truth in units of flux.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const nights, first = 4, 60
			field, err := trial.Airy(true)
			if err != nil {
				return nil, err
			}
			// A cycle of 25 minutes turns the sky by 7 degrees, which moves the bluest light by
			// 0.3 elements and scatters its stars by 1.0 %: no factor of a frame explains that,
			// and plan limits cycles for it. The same light in a third of the time.
			field.Target.DwellSeconds /= 3
			field.Target.Calibration.Dark.DwellSeconds = field.Target.DwellSeconds
			field.Profile.Detector.ReadS = 1
			field.Dim(-2.5 * math.Log10(3))
			flux, err := field.StarNight(ctx, filepath.Join(dir, "star"), 10.3, 1.15, first)
			if err != nil {
				return nil, err
			}
			night, err := field.Plan(ctx, dir)
			if err != nil {
				return nil, err
			}
			recipe, err := field.OnSkyRecipe(reduce.SkyRecipe{Use: "auto"}, flux)
			if err != nil {
				return nil, err
			}
			var stars starSums
			var pulls trial.Moments
			for seed := range uint64(nights) {
				if err := onSkyNight(ctx, night, first+1+seed, recipe, &stars, &pulls); err != nil {
					return nil, err
				}
			}
			n := pulls.N / 2
			return append(stars.findings(),
				trial.Near("standard deviation of pulls, all good voxels", pulls.Std(), 1, 0.05, 1/math.Sqrt(2*float64(n)), n),
				trial.Near("their mean", pulls.Mean(), 0, 0.05, 1/math.Sqrt(float64(n)), n)), nil
		},
	}
}

func onSkyNight(ctx context.Context, night *trial.Night, seed uint64, recipe *reduce.Recipe, stars *starSums, pulls *trial.Moments) error {
	label := fmt.Sprintf("air%d", seed)
	if err := night.Rehearse(ctx, label, rehearse.Options{Seed: seed}); err != nil {
		return err
	}
	result, err := night.Reduce(ctx, label, reduce.Options{Cube: true, Recipe: recipe})
	if err != nil {
		return err
	}
	if len(result.Degraded) > 0 {
		return fmt.Errorf("a clean night is not whole: %v", result.Degraded)
	}
	c, err := trial.ReadCube(night.CubePath(label))
	if err != nil {
		return err
	}
	truth, err := night.FluxTruth(c, label)
	if err != nil {
		return err
	}
	for i, t := range truth {
		if c.Good(i) && t == t {
			pulls.Add(float64(c.Signal[i]-t) / math.Sqrt(float64(c.Variance[i])))
		}
	}
	for k := range night.Field.Scene.Sources {
		stars.add(night.StarRatios(c, &night.Field.Scene.Sources[k], starBands, 3))
	}
	return night.Discard(label)
}

const starBands = 5

// starSums are mean and squares of errors over stars and nights, by band.
type starSums struct {
	ratio, element, row [starBands]trial.Moments
	errors, places      [starBands]float64 // sums of squares
	from, to            [starBands]float64
}

func (s *starSums) add(bands []trial.BandRatio) {
	for b, x := range bands {
		s.ratio[b].Add(x.Ratio)
		s.element[b].Add(x.Element)
		s.row[b].Add(x.Row)
		s.errors[b] += x.Error * x.Error
		s.places[b] += x.CentroidError * x.CentroidError
		s.from[b], s.to[b] = x.FromNM, x.ToNM
	}
}

func (s *starSums) findings() []trial.Finding {
	var list []trial.Finding
	for b := range starBands {
		n := s.ratio[b].N
		band := fmt.Sprintf("%.0f to %.0f nm, mean of %d stars", s.from[b], s.to[b], n)
		list = append(list,
			trial.Near("flux over the true one, "+band, s.ratio[b].Mean(), 1, 0.01, math.Sqrt(s.errors[b])/float64(n), n),
			trial.Stated("scatter of the same, star by star", s.ratio[b].Std(), n),
			trial.Below("the same beyond its own errors", math.Sqrt(max(0, s.ratio[b].Std()*s.ratio[b].Std()-s.errors[b]/float64(n))), 0.01, n),
			trial.Near("centre of light, elements, "+band, s.element[b].Mean(), 0, 0.1, math.Sqrt(s.places[b])/float64(n), n),
			trial.Near("centre of light, rows, "+band, s.row[b].Mean(), 0, 0.1, math.Sqrt(s.places[b])/float64(n), n))
	}
	return list
}
