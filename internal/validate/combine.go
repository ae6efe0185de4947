package main

import (
	"context"
	"path/filepath"

	"mirrorloom/internal/trial"
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
the first, 8 rows and more from the slit's ends, where the two nights lose other light.`,
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
	return append(all, list...), err
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
