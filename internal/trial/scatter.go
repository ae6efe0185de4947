package trial

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Scatter is the scatter of every voxel of the element cube over nights that
// differ in their seed alone, beside the VARIANCE that each night claims.
type Scatter struct {
	Nights       int
	mean, square []float64 // running mean and sum of squares about it
	claimed      []float64 // sum of VARIANCE
	good         []bool
}

// MeasureScatter rehearses and reduces so many nights of a field, with the seeds
// first, first+1 ..., one after the other in dir.
func (f *Field) MeasureScatter(ctx context.Context, dir string, nights int, first uint64) (*Scatter, error) {
	night, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	s := new(Scatter)
	for k := range nights {
		name := fmt.Sprint(k)
		if err := night.Rehearse(ctx, name, rehearse.Options{Seed: first + uint64(k), NoTruth: true}); err != nil {
			return nil, err
		}
		if _, err := night.Reduce(ctx, name, reduce.Options{Elements: true}); err != nil {
			return nil, err
		}
		c, err := ReadCube(night.ElementsPath(name))
		if err != nil {
			return nil, err
		}
		s.add(c)
		for _, gone := range []string{night.Frames(name), night.Run(name)} {
			if err := os.RemoveAll(filepath.Clean(gone)); err != nil {
				return nil, err
			}
		}
	}
	return s, nil
}

// add takes a night by Welford's update, which does not cancel.
func (s *Scatter) add(c *Cube) {
	if s.Nights == 0 {
		n := len(c.Signal)
		s.mean, s.square, s.claimed, s.good = make([]float64, n), make([]float64, n), make([]float64, n), make([]bool, n)
		for i := range s.good {
			s.good[i] = true
		}
	}
	s.Nights++
	for i, v := range c.Signal {
		d := float64(v) - s.mean[i]
		s.mean[i] += d / float64(s.Nights)
		s.square[i] += d * (float64(v) - s.mean[i])
		s.claimed[i] += float64(c.Variance[i])
		s.good[i] = s.good[i] && c.Flags[i] == 0
	}
}

// Findings judge the ratios r of each voxel's scatter over its mean VARIANCE: over
// nights of one seed each r is chi-square distributed with f = nights-1 degrees of
// freedom, over f. So the mean of r is 1 with a standard error of sqrt(2/f)/sqrt N,
// and that of (r-1)^2/(2/f) is 1 with sqrt(2 + 12/f)/sqrt N (the fourth moment of
// chi-square). scale multiplies VARIANCE: a test of the test.
func (s *Scatter) Findings(name string, scale float64) []Finding {
	var ratio, chi2 Moments
	f := float64(s.Nights - 1)
	for i, good := range s.good {
		if !good {
			continue
		}
		r := s.square[i] / f / (scale * s.claimed[i] / float64(s.Nights))
		ratio.Add(r)
		chi2.Add((r - 1) * (r - 1) * f / 2)
	}
	n := ratio.N
	root := math.Sqrt(float64(n))
	name = fmt.Sprintf("%s, %d seeds", name, s.Nights)
	return []Finding{
		Near(name+": mean of scatter over VARIANCE", ratio.Mean(), 1, 0.01, math.Sqrt(2/f)/root, n),
		Near(name+": chi-square of the ratios", chi2.Mean(), 1, 0, math.Sqrt(2+12/f)/root, n),
	}
}
