package trial

import (
	"context"
	"math"

	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Sky is a scene that tells more or less of its frames' throughput.
type Sky struct {
	Name string
	// Rich scenes differ enough from pixel to pixel that the dark columns measure
	// every frame.
	Rich bool
	set  func(f *Field)
}

// Skies are six scenes of a small field, from the one that measures throughput best
// to the one that measures it least.
func Skies() []Sky {
	return []Sky{
		{"demo field", true, func(*Field) {}},
		{"sky lines", true, func(f *Field) { f.Scene.Sources = nil }},
		{"five stars", false, func(f *Field) { f.onlyStars(5) }},
		{"one star", false, func(f *Field) { f.onlyStars(1) }},
		{"smooth continuum", false, func(f *Field) { f.Scene.Sources, f.Scene.Sky.Lines = nil, nil }},
		{"one spatial profile", false, func(f *Field) { f.oneProfile() }},
	}
}

// Show puts a sky over the field.
func (f *Field) Show(s Sky) {
	f.scenery()
	s.set(f)
}

// Alter makes the scene that the field has the sky's, without new scenery.
func (f *Field) Alter(s Sky) { s.set(f) }

// onlyStars leaves the first n stars on a sky without light.
func (f *Field) onlyStars(n int) {
	var stars []rehearse.Source
	for _, s := range f.Scene.Sources {
		if s.Kind == rehearse.KindStar && len(stars) < n {
			stars = append(stars, s)
		}
	}
	f.Scene.Sources, f.Scene.Sky = stars, rehearse.Sky{}
}

// oneProfile is a round Gaussian of one colour, whose light falls on the elements in
// the same proportions in every row.
func (f *Field) oneProfile() {
	halfU, _ := f.HalfArcsec()
	mag := 14.0
	f.Scene.Sources = []rehearse.Source{{
		Kind: rehearse.KindGaussian, WidthArcsec: halfU, ABMag: &mag, AtNM: f.Profile.Spectrograph.CenterNM,
	}}
	f.Scene.Sky = rehearse.Sky{}
}

// Expose sets the dwell so that a sample of the field's brighter pixels holds sn^2
// electrons of light, a signal-to-noise ratio of sn.
func (f *Field) Expose(ctx context.Context, dir string, sn float64) error {
	mean, err := f.Brightness(ctx, dir)
	if err != nil {
		return err
	}
	dwell := f.Target.DwellSeconds * sn * sn / mean
	dwell = math.Round(dwell*1000) / 1000
	f.Target.DwellSeconds = dwell
	f.Target.Calibration.Dark = sequence.DarkFrames{Count: f.Target.Calibration.Dark.Count, DwellSeconds: dwell}
	return nil
}
