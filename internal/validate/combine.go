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
with what the variances of twin nights without noise predict for means weighted by 1/VARIANCE.`,
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
	return all, nil
}
