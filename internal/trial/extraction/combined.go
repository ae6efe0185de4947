package extraction

import (
	"context"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/combine"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// displaced is where the second night of each pair points, elements and rows further on:
// some apertures lie in both nights, some in the first alone, some across the border.
var displaced = [2]float64{9, 12}

// MeasureCombined does as MeasureApertures with pairs of nights, the second displaced and
// of two cycles, that are combined: so many pairs, with the seeds first, first+1 ..., two
// of them a pair.
func MeasureCombined(ctx context.Context, dir string, stars bool, pairs int, first uint64) (*Scatter, error) {
	field, err := tried(stars)
	if err != nil {
		return nil, err
	}
	other := field.Displaced(displaced[0], displaced[1])
	other.Target.Code.Cycles = 2
	var nights [2]*trial.Night
	for i, f := range []*trial.Field{field, other} {
		if nights[i], err = f.Plan(ctx, filepath.Join(dir, fmt.Sprint(i))); err != nil {
			return nil, err
		}
	}
	s := new(Scatter)
	if s.apertures, err = apertures(); err != nil {
		return nil, err
	}
	for k := range pairs {
		if err := s.addPair(ctx, filepath.Join(dir, "combined"), nights, first+2*uint64(k)); err != nil {
			return nil, err
		}
	}
	return s, nil
}

// addPair makes both nights, combines them into the folder all and extracts.
func (s *Scatter) addPair(ctx context.Context, all string, nights [2]*trial.Night, seed uint64) error {
	opts := combine.Options{Out: all}
	for i, n := range nights {
		if err := n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: seed + uint64(i), NoTruth: true}); err != nil {
			return err
		}
		if _, err := n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true}); err != nil {
			return err
		}
		opts.Runs = append(opts.Runs, n.Run(trial.Noisy))
	}
	if err := os.MkdirAll(all, 0o755); err != nil {
		return err
	}
	if _, err := combine.Run(ctx, opts); err != nil {
		return err
	}
	if err := s.add(ctx, all); err != nil {
		return err
	}
	for _, n := range nights {
		if err := n.Discard(trial.Noisy); err != nil {
			return err
		}
	}
	return os.RemoveAll(all)
}
