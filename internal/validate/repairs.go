package main

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/internal/trial"
)

// smallFields are the two small instruments.
var smallFields = []struct {
	name string
	make func() (*trial.Field, error)
}{{"square", trial.Square}, {"diagonal", trial.Diagonal}}

func restoreLost() check {
	return check{
		name: "Restore lost frames",
		about: `Nights of two small fields (v = 63, 16 dark columns) from which a quarter and half
as many science frames as there are dark columns are missing, restored from those.
TestRestoreLostRows counts singular sets and compares scatter and variance over 600
random sets.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, field := range smallFields {
				for i, lost := range []int{2, 4, 8} {
					f, err := field.make()
					if err != nil {
						return nil, err
					}
					name := fmt.Sprintf("%s field, %d frames lost", field.name, lost)
					found, err := f.RestoredFindings(ctx, name, filepath.Join(dir, fmt.Sprintf("%s-%d", field.name, lost)), uint64(40+i), lost)
					if err != nil {
						return nil, err
					}
					all = append(all, found...)
				}
			}
			return all, nil
		},
	}
}

func residualLight() check {
	return check{
		name: "Take off leaking light",
		about: `Six nights each without noise whose off mirrors leak 1/500 of their light with 20 % of
structure, a star outside the field of about a thousand elements' light, under a
bright sky, and a throughput that drifts by 5 %: with all-off frames, and by the dark
columns without. Left of the leak is what the night has more than one without leak.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, field := range smallFields {
				for _, allOff := range []bool{true, false} {
					f, err := field.make()
					if err != nil {
						return nil, err
					}
					found, err := f.LeakFindings(ctx, field.name+" field", filepath.Join(dir, fmt.Sprint(field.name, allOff)), []uint64{60, 61, 62, 63, 64, 65}, allOff)
					if err != nil {
						return nil, err
					}
					all = append(all, found...)
				}
			}
			return all, nil
		},
	}
}

func errorScale() check {
	return check{
		name: "Error scale",
		about: `Nights of two small fields whose stars are 25 times brighter, with a seeing that
varies by 10 %, guiding errors of 0.1 element and image drift of 0.1 px, which no
factor of a frame explains; and clean nights of the fields as they are.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			const brighter = 3.5
			var all []trial.Finding
			for i, field := range smallFields {
				for _, c := range []struct {
					name     string
					brighter float64
					faults   []string
				}{
					{"clean", 0, nil},
					{"seeing=0.1", brighter, []string{"seeing=0.1"}},
					{"guide=0.1", brighter, []string{"guide=0.1"}},
					{"shift=0.1", brighter, []string{"shift=0.1"}},
					{"all three", brighter, []string{"seeing=0.1", "guide=0.1", "shift=0.1"}},
				} {
					f, err := field.make()
					if err != nil {
						return nil, err
					}
					name := fmt.Sprintf("%s field, %s", field.name, c.name)
					found, err := f.ErrorScaleFindings(ctx, name, filepath.Join(dir, field.name+c.name), uint64(80+i), c.brighter, c.faults...)
					if err != nil {
						return nil, err
					}
					all = append(all, found...)
				}
			}
			return all, nil
		},
	}
}

func allFaults() check {
	return check{
		name: "All faults that dark columns are for",
		about: `The demo's night with drift=0.05, leak=0.002, lost=2, mislabel=2 and sky=0.05,
reduced with no options, and with some of the corrections alone.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			f, err := trial.Embedded("optical", "demo", "demo")
			if err != nil {
				return nil, err
			}
			f.Imperfect = true
			return f.AllFaultsFindings(ctx, "demo", dir, 5, "drift=0.05", "leak=0.002", "lost=2", "mislabel=2", "sky=0.05")
		},
	}
}
