package main

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Sizes of the terms put in.
const (
	lampNeighbour = 0.01
	lampLeak      = 3e-4
	lampPlaces    = 5 // wavelengths of the calibration's lists in run.json
)

// lampTerms measures the neighbour term and the contrast on noisy nights that have
// both.
func lampTerms() check {
	return check{
		name: "Neighbour term and contrast",
		about: `Imperfect nights of both profiles with noise, a neighbour term of 1 % at the band's
centre, in proportion to the wavelength, and a leak of 3e-4 with a structure of 20 %,
mirrors outside the field included: eight of the optical instrument, twelve of the
infrared one, whose diamond of mirrors has nearly as many outside the field as in it, so
that one night tells its contrast to 2 % and the worst of twelve to 5 %: the means of each
wavelength over the nights are held to 3 %, and each night to its own error. The lamp
frames measure both. A neighbour term that is off by e leaves ghosts of e/4 of a star in
an m-sequence. Of each night the contrast at five wavelengths is compared with the truth; pulls are of the middle one,
with the errors that run.json states.`,
		run: func(ctx context.Context, dir string) ([]trial.Finding, error) {
			var all []trial.Finding
			for _, c := range []struct {
				profile, target string
				nights          int
			}{{"optical", "demo", 8}, {"infrared", "demo-infrared", 12}} {
				m := lampMeasure{profile: c.profile}
				for seed := range c.nights {
					if err := m.night(ctx, filepath.Join(dir, fmt.Sprint(c.profile, seed)), c.target, uint64(1+seed)); err != nil {
						return nil, err
					}
				}
				all = append(all, m.findings()...)
			}
			return all, nil
		},
	}
}

// lampMeasure gathers what the lamp frames of some nights say.
type lampMeasure struct {
	profile                       string
	ghost, worst                  float64
	neighbourPulls, contrastPulls trial.Sample
	places                        [lampPlaces]trial.Sample // contrast over the truth's, by wavelength
}

func (m *lampMeasure) night(ctx context.Context, dir, name string, seed uint64) error {
	f, err := trial.Embedded(m.profile, name, name)
	if err != nil {
		return err
	}
	f.Imperfect, f.Target.Code.Cycles = true, 1
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return err
	}
	defer os.RemoveAll(dir)
	faults := []rehearse.Fault{{Name: rehearse.Neighbour, Size: lampNeighbour}, {Name: rehearse.Leak, Size: lampLeak}}
	if err := n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: seed, NoTruth: true, Faults: faults}); err != nil {
		return err
	}
	r, err := n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	if err != nil {
		return err
	}
	c := r.Run.Calibration
	if c == nil || len(c.Neighbour) != len(m.places) || len(c.Contrast) != len(m.places) {
		return fmt.Errorf("%s: the lamp measured no neighbour term or no contrast: %v", m.profile, r.Degraded)
	}
	for i, at := range c.Neighbour {
		off := at.Value - lampNeighbour*at.WavelengthNM/f.Profile.Spectrograph.CenterNM
		m.ghost = max(m.ghost, math.Abs(off)/4)
		if i == len(m.places)/2 {
			m.neighbourPulls.Add(off / at.Error)
		}
	}
	for i, at := range c.Contrast {
		m.places[i].Add(at.Value * lampLeak)
		m.worst = max(m.worst, math.Abs(at.Value*lampLeak-1))
		if i == len(m.places)/2 {
			m.contrastPulls.Add((at.Value - 1/lampLeak) / at.Error)
		}
	}
	return nil
}

func (m *lampMeasure) findings() []trial.Finding {
	all := []trial.Finding{trial.Below(m.profile+": largest ghost left of a star, of its light", m.ghost, 2e-4, m.neighbourPulls.N())}
	for i := range m.places {
		what := fmt.Sprintf("%s: contrast over the truth's, place %d of %d in the band", m.profile, i+1, len(m.places))
		all = append(all, trial.Near(what, m.places[i].Mean(), 1, 0.03, 0, m.places[i].N()))
	}
	middle := &m.places[len(m.places)/2]
	return append(all,
		trial.Below(m.profile+": 5 standard errors of that mean, middle of the band", 5*middle.StandardError(), 0.03, middle.N()),
		trial.Below(m.profile+": rms pull of the contrast", m.contrastPulls.RMS(), 1.5, middle.N()),
		trial.Below(m.profile+": rms pull of the neighbour term", m.neighbourPulls.RMS(), 1.5, middle.N()),
		trial.Stated(m.profile+": contrast, largest error of any night and wavelength", m.worst, middle.N()))
}
