package main

import (
	"context"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/internal/trial/extraction"
)

func combined() check {
	return check{
		name: "Dithered nights combined",
		about: `Two nights of each small field, the telescope displaced between them by 3 elements and 5 rows
(square) or -2 elements and 7 rows (diagonal), the second with two cycles, so that its variance is about
half: the runs are combined and the whole cube, of both fields, is compared with the truth. S/N is compared
with what the variances of twin nights without noise predict for means weighted by 1/VARIANCE. And
two nights of the square field with 111 elements of one mirror, the second displaced by 2.37 elements and
-1.61 rows and reduced with ` + "`grid.onto`" + ` onto the voxels of the first: both are compared with the truth of
the first, 8 rows and more from the slit's ends, where the two nights lose other light.

Last, 30 pairs of nights with bright stars, the second of two cycles and displaced by 9 elements and 12
rows, that differ in their seeds alone: from each combined cube 20 apertures are extracted, and the scatter of
their channels over the pairs is compared with the error quoted, as for single nights above.`,
		run: runCombined,
	}
}

func runCombined(ctx context.Context, dir string) ([]trial.Finding, error) {
	var all []trial.Finding
	for _, f := range []struct {
		name           string
		make           func() (*trial.Field, error)
		elements, rows float64
	}{{"square", trial.Square, 3, 5}, {"diagonal", trial.Diagonal, -2, 7}} {
		field, err := f.make()
		if err != nil {
			return nil, err
		}
		nights, err := field.PairDisplaced(ctx, filepath.Join(dir, f.name), f.elements, f.rows, 2, 1)
		if err != nil {
			return nil, err
		}
		c, err := trial.Combine(ctx, filepath.Join(dir, f.name, "combined"), nights)
		if err != nil {
			return nil, err
		}
		list, err := c.Findings(f.name)
		if err != nil {
			return nil, err
		}
		all = append(all, list...)
	}
	list, err := combinedOnto(ctx, filepath.Join(dir, "onto"))
	if err != nil {
		return nil, err
	}
	sums, err := combinedSums(ctx, filepath.Join(dir, "sums"))
	return append(append(all, list...), sums...), err
}

// combinedSums are those over apertures.
func combinedSums(ctx context.Context, dir string) ([]trial.Finding, error) {
	const pairs, first = 30, 40000
	s, err := extraction.MeasureCombined(ctx, dir, true, pairs, first)
	if err != nil {
		return nil, err
	}
	const name = "sums over combined cubes"
	// The band has five standard errors of so few pairs.
	figures := extraction.Required()
	figures.Band = 0.21
	return append(s.Findings(name, figures, 1), trial.MustFail(name+": the same check, errors scaled by 0.95", s.Findings(name, figures, 0.95))), nil
}

// combinedOnto is a dither by parts of a voxel.
func combinedOnto(ctx context.Context, dir string) ([]trial.Finding, error) {
	field, err := trial.Struckable(127, 16)
	if err != nil {
		return nil, err
	}
	nights, err := field.PairOnto(ctx, dir, 2.37, -1.61, 1)
	if err != nil {
		return nil, err
	}
	c, err := trial.CombineOnto(ctx, filepath.Join(dir, "combined"), nights)
	if err != nil {
		return nil, err
	}
	return c.Findings("square, onto the first night's voxels")
}
