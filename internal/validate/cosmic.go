package main

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

func cosmicRays() check {
	return check{
		name: "Cosmic rays",
		about: `Nights of a small field (111, 95 or 223 elements of one mirror, 48 rows, noise of a raw sample near
10 e) with struck samples: log-normal charges (median 1500 e, sigma 0.8) in tracks, as rehearse
draws them, and single samples of a power law E^-1.5 from 20 e on, added to the frames. Strong hits are above eight
standard errors of the charge that the dark columns measure. Rows of bright stars, where the
variance is above 1.5 times its median, are counted apart. Pulls are those of the
other checks; their kurtosis is 3 for a normal law.`,
		run: runCosmic,
	}
}

// brightRows times the median variance: what lies above are the rows of bright stars.
const brightRows = 1.5

// powerLaw draws charges of E^-1.5 from 20 e on.
func powerLaw(r *rand.Rand) float64 {
	u := 1 - r.Float64()
	return 20 / (u * u)
}

func runCosmic(ctx context.Context, dir string) ([]trial.Finding, error) {
	var all []trial.Finding
	for i, c := range []struct {
		name    string
		v, dark int
		tracks  float64 // per thousand, of rehearse
		single  float64 // share, of the power law
		stated  bool
	}{
		{"log-normal 2e-4, v = 127, g = 16", 127, 16, 0.2, 0, false},
		{"log-normal 2e-4, v = 255, g = 16", 255, 16, 0.2, 0, false},
		{"log-normal 5e-3, v = 127, g = 32", 127, 32, 5, 0, false},
		{"log-normal 5e-3, v = 255, g = 32", 255, 32, 5, 0, false},
		{"power law 2e-4, v = 127, g = 16", 127, 16, 0, 2e-4, false},
		{"power law 2e-4, v = 255, g = 16", 255, 16, 0, 2e-4, false},
		{"power law 5e-3, v = 127, g = 32", 127, 32, 0, 5e-3, true},
	} {
		found, err := cosmicNights(ctx, fmt.Sprintf("%s/%d", dir, i), c.name, c.v, c.dark, c.tracks, c.single, c.stated)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", c.name, err)
		}
		all = append(all, found...)
	}
	return all, nil
}

// cosmicSeeds nights make the samples enough for a share of 3 in a million.
const cosmicSeeds = 4

func cosmicNights(ctx context.Context, dir, name string, v, dark int, tracks, single float64, stated bool) ([]trial.Finding, error) {
	field, err := trial.Struckable(v, dark)
	if err != nil {
		return nil, err
	}
	n, err := field.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	recipe, err := reduce.LoadRecipe("nominal")
	if err != nil {
		return nil, err
	}
	recipe.Repair.Use = "auto"
	opts := reduce.Options{Cube: true, Elements: true, Recipe: recipe}
	if err := n.Rehearse(ctx, trial.Twin, rehearse.Options{Seed: 1, Noiseless: true}); err != nil {
		return nil, err
	}
	if _, err := n.Reduce(ctx, trial.Twin, opts); err != nil {
		return nil, err
	}
	var plain, bright trial.StrikeCount
	var pulls *trial.Pulls
	var kurtosis trial.Kurtosis
	for seed := uint64(1); seed <= cosmicSeeds; seed++ {
		night := trial.Noisy
		var faults []rehearse.Fault
		if tracks > 0 {
			faults = append(faults, rehearse.Fault{Name: rehearse.Cosmic, Size: tracks})
		}
		if err := n.Discard(night); err != nil {
			return nil, err
		}
		if err := n.Rehearse(ctx, night, rehearse.Options{Seed: seed, Faults: faults}); err != nil {
			return nil, err
		}
		strikes, err := n.TrueStrikes(night)
		if err != nil {
			return nil, err
		}
		if single > 0 {
			if strikes, err = n.Strike(night, single, powerLaw, seed); err != nil {
				return nil, err
			}
		}
		if _, err := n.Reduce(ctx, night, opts); err != nil {
			return nil, err
		}
		for _, part := range []struct {
			to     *trial.StrikeCount
			bright bool
		}{{&plain, false}, {&bright, true}} {
			c, err := n.CountStruck(night, strikes, func(variance, median float64) bool { return (variance > brightRows*median) == part.bright })
			if err != nil {
				return nil, err
			}
			part.to.Add(c)
		}
		more, cube, err := n.PullsOfNight(night, 1)
		if err != nil {
			return nil, err
		}
		truth, err := cube.ReadTruth(n.TruthPath(night))
		if err != nil {
			return nil, err
		}
		kurtosis.Add(cube, truth)
		if pulls == nil {
			pulls = more
		} else {
			pulls.Merge(more)
		}
	}
	found := plain.StruckFindings(name)
	found = append(found,
		trial.Stated(name+", bright rows: strong hits restored or flagged", float64(bright.Restored+bright.Flagged)/math.Max(1, float64(bright.Strong)), bright.Strong),
		trial.Stated(name+", bright rows: samples restored without need", float64(bright.Needless)/math.Max(1, float64(bright.Samples)), bright.Samples),
		trial.Stated(name+": kurtosis of pulls", kurtosis.Value(), kurtosis.N))
	found = append(found, pulls.FaultyFindings(name)...)
	if stated {
		for i := range found {
			found[i].Required, found[i].OK = "stated", true
		}
	}
	return found, nil
}
