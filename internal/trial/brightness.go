package trial

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Brightness is the mean of the light of a field in a sample (a pixel of a science
// frame) in electrons, over the pixels that hold more than a fifth of the
// brightest one's: k/v of the elements' sum, from a night without noise in dir.
func (f *Field) Brightness(ctx context.Context, dir string) (float64, error) {
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return 0, err
	}
	if err := n.Rehearse(ctx, Twin, rehearse.Options{Noiseless: true, NoTruth: true}); err != nil {
		return 0, err
	}
	if _, err := n.Reduce(ctx, Twin, reduce.Options{Elements: true}); err != nil {
		return 0, err
	}
	c, err := ReadCube(n.ElementsPath(Twin))
	if err != nil {
		return 0, err
	}
	total := make([]float64, c.N*c.Rows)
	for i, v := range c.Signal {
		total[i%len(total)] += float64(v) * float64(n.Seq.K) / float64(n.Seq.V)
	}
	brightest := 0.0
	for _, t := range total {
		brightest = max(brightest, t)
	}
	var m Moments
	for _, t := range total {
		if t > brightest/5 {
			m.Add(t)
		}
	}
	return m.Mean(), nil
}

// FaintPair is Pair of the field made so faint that its samples hold 0.3 e of sky
// on average, beside a read noise of 1 e.
func (f *Field) FaintPair(ctx context.Context, dir string, seed uint64) (*Night, error) {
	const wanted, first = 0.3, 25.0
	f.Faint(first)
	mean, err := f.Brightness(ctx, filepath.Join(dir, "first"))
	if err != nil {
		return nil, err
	}
	f.Faint(first + 2.5*math.Log10(mean/wanted))
	if mean, err = f.Brightness(ctx, filepath.Join(dir, "second")); err != nil {
		return nil, err
	}
	if math.Abs(mean/wanted-1) > 0.01 {
		return nil, fmt.Errorf("the faint field has %.3f e a sample, not %.1f", mean, wanted)
	}
	night, _, err := f.Pair(ctx, filepath.Join(dir, "pair"), seed)
	return night, err
}
