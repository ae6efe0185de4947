package trial

import (
	"context"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/calib"
)

// Undarken gives the field a code without dark columns for the elements that it has,
// and its amplifiers one read noise.
func (f *Field) Undarken(family string, readNoiseE float64) {
	f.SetCode(family, f.Elements(), 0)
	for i := range f.Profile.Detector.Amplifiers {
		f.Profile.Detector.Amplifiers[i].ReadNoiseE = readNoiseE
		f.Profile.Detector.Amplifiers[i].GainEPerADU = 1.3
	}
}

// How much worse than astroscrappy the single-frame search may be: in the share of
// struck samples found, and in samples found that were not struck, of all. And how
// many of the struck samples that either finds both have to find.
const (
	shareMargin = 0.01
	alarmMargin = 1e-5
	agreement   = 0.97
	// frameEdge: astroscrappy takes no medians on the outer 3 pixels of a frame and
	// finds hardly anything there, so the two are compared further inside.
	frameEdge = 3
)

// CompareStruck makes a night of the field with perThousand struck samples per 1000
// in dir and holds calib.DefaultEdgeRule against astroscrappy with the same figures,
// on every so many-th science frame.
func (f *Field) CompareStruck(ctx context.Context, dir, what string, seed uint64, perThousand float64, every int) ([]Finding, error) {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, err
	}
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, err
	}
	s, err := n.MakeStruck(ctx, "struck", seed, perThousand, every)
	if err != nil {
		return nil, err
	}
	rule := calib.DefaultEdgeRule()
	ours, err := s.Ours(rule)
	if err != nil {
		return nil, err
	}
	theirs, version, err := s.Theirs(ctx, rule, filepath.Clean(dir))
	if err != nil {
		return nil, err
	}
	a, b := s.Judge(ours, frameEdge), s.Judge(theirs, frameEdge)
	var all []Finding
	for k, level := range CatchLevels {
		all = append(all, Finding{
			What:     fmt.Sprintf("%s: found of struck samples above %g sigmas", what, level),
			Required: fmt.Sprintf(">= astroscrappy's (%s) - %g", version, shareMargin),
			Measured: fmt.Sprintf("%.4f, astroscrappy %.4f", a.Share(k), b.Share(k)),
			N:        a.Struck[k], OK: a.Share(k) >= b.Share(k)-shareMargin,
		})
	}
	alarms := func(place string, ours, theirs int) Finding {
		return Finding{
			What:     fmt.Sprintf("%s: samples found that were not struck, %s", what, place),
			Required: fmt.Sprintf("<= astroscrappy's + %g of all", alarmMargin),
			Measured: fmt.Sprintf("%d, astroscrappy %d", ours, theirs),
			N:        a.Samples, OK: float64(ours) <= float64(theirs)+alarmMargin*float64(a.Samples),
		}
	}
	all = append(all, alarms("more than 2 pixels from a hit", a.Alone, b.Alone), alarms("nearer", a.Beside, b.Beside))
	both, either := s.Agreement(ours, theirs, frameEdge)
	a, b = s.Judge(ours, 0), s.Judge(theirs, 0)
	all = append(all, Finding{
		What:     fmt.Sprintf("%s: the frame's outer %d pixels included, above %g sigmas", what, frameEdge, CatchLevels[1]),
		Required: "stated", Measured: fmt.Sprintf("%.4f, astroscrappy %.4f", a.Share(1), b.Share(1)), N: a.Struck[1], OK: true,
	})
	return append(all, AtLeast(what+": struck samples that both find, of those that either does", both, agreement, either)), nil
}
