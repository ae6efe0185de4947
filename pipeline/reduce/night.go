package reduce

import (
	"fmt"
	"path/filepath"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// roles sorts a night's frames by what they are for.
type roles struct {
	calibration calibration
	arcs        []*exposure.Frame
	refstars    []*exposure.Frame   // of a star through one wide element
	slots       [][]*exposure.Frame // science frames by code row
	science     int                 // their number
	lost        []int               // code rows without a frame
	missing     []int               // science steps without a frame, from 1
	degraded    []string            // calibrations that were planned and are missing
	warnings    []string
}

// sources are the frames that a reduction opens, in the order of their steps:
// those of science, and what the recipe asks for. Lamp frames with all mirrors on
// tell dead pixels, so that the detector asks for them as well as the flat.
func sources(seq *sequence.Sequence, night *pair.Night, recipe *Recipe, cycles []int) []exposure.Source {
	detector := recipe.Detector.Use != useOff
	flat, arc := recipe.Flat.Use != useOff, recipe.Arc.Use == useAuto
	var all []exposure.Source
	for _, f := range night.Frames {
		wanted := false
		switch f.Kind {
		case sequence.Science:
			wanted = usesCycle(cycles, seq.Steps[f.StepIndex])
		case sequence.Bias, sequence.Dark, sequence.AllOff:
			wanted = detector
		case sequence.Flat:
			wanted = flat || detector && isLampOn(seq, f.StepIndex)
		case sequence.Arc:
			wanted = arc
		case sequence.RefStar:
			wanted = recipe.Flux.Use == useAuto
		}
		if !wanted {
			continue
		}
		all = append(all, exposure.Source{Path: f.Path, Name: filepath.Base(f.Path), HDU: f.HDU, Step: f.StepIndex, Entry: f.StepIndex})
	}
	return all
}

// isLampOn tells a lamp frame with every element open.
func isLampOn(seq *sequence.Sequence, step int) bool {
	pattern, _ := seq.Pattern(step)
	return seq.Steps[step].Kind == sequence.Flat && pattern == sequence.PatternOn
}

// assign sorts the open frames and says what is missing.
func assign(seq *sequence.Sequence, frames []*exposure.Frame, useCalibration bool, cycles []int) (*roles, error) {
	r := &roles{slots: make([][]*exposure.Frame, seq.V)}
	times := map[sequence.Kind]float64{}
	for _, f := range frames {
		step := seq.Steps[f.Step]
		switch step.Kind {
		case sequence.Science:
			r.slots[step.Row] = append(r.slots[step.Row], f)
			r.science++
		case sequence.Bias:
			r.calibration.bias = append(r.calibration.bias, f)
		case sequence.Dark:
			r.calibration.dark = append(r.calibration.dark, f)
		case sequence.AllOff:
			r.calibration.off = append(r.calibration.off, f)
		case sequence.Flat:
			if err := r.calibration.lamps.add(seq, f); err != nil {
				return nil, err
			}
			continue
		case sequence.Arc:
			r.arcs = append(r.arcs, f)
			continue // of as many times as there are lamps
		case sequence.RefStar:
			r.refstars = append(r.refstars, f)
		}
		if t, seen := times[step.Kind]; seen && t != step.ExptimeSeconds && step.Kind != sequence.Bias {
			return nil, fmt.Errorf("the sequence has %s steps of %g s and of %g s; plan them all of one exposure time", step.Kind, t, step.ExptimeSeconds)
		}
		times[step.Kind] = step.ExptimeSeconds
	}
	c := &r.calibration
	c.scienceSeconds, c.darkSeconds, c.offSeconds = times[sequence.Science], times[sequence.Dark], times[sequence.AllOff]
	r.findLost(seq, cycles)
	if useCalibration {
		r.findMissing(seq)
	}
	return r, nil
}

// findMissing says which calibrations were planned and are not there at all.
func (r *roles) findMissing(seq *sequence.Sequence) {
	c := &r.calibration
	for _, want := range []struct {
		what    string
		kind    sequence.Kind
		have    []*exposure.Frame
		without string
	}{
		{"bias", sequence.Bias, c.bias, "the bias level is the overscan's or the profile's, without its structure"},
		{"dark", sequence.Dark, c.dark, "no dark current is taken off but by the all-off frames, and hot pixels are not known"},
		{"all-off", sequence.AllOff, c.off, "leaking light is not taken off"},
	} {
		planned := len(seq.StepsOf(want.kind))
		switch {
		case planned > 0 && len(want.have) == 0:
			r.degraded = append(r.degraded, fmt.Sprintf("all %d %s frames are missing: %s", planned, want.what, want.without))
		case len(want.have) < planned:
			r.warnings = append(r.warnings, fmt.Sprintf("%d of %d %s frames are missing", planned-len(want.have), planned, want.what))
		}
	}
	for i := range seq.Steps {
		if isLampOn(seq, i) && len(c.lamps.on) == 0 {
			r.degraded = append(r.degraded, "all lamp frames with every mirror on are missing: dead pixels are not known")
			break
		}
	}
}

// fillLedger puts what was measured into the ledger.
func (r *roles) fillLedger(l product.Ledger, frames []*exposure.Frame, seq *sequence.Sequence, pixels int) {
	for _, f := range frames {
		if seq.Steps[f.Step].Kind == sequence.Science {
			l[f.Entry].SaturatedFraction = float64(f.Saturated) / float64(pixels)
		}
	}
}
