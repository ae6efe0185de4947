package reduce

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// newRepair prepares what d may restore; nil where the recipe or too few dark columns
// forbid it. Frames of the light without any open mirror are off. lack says why lost
// rows are not to be restored, if there are any.
func (r *reduction) newRepair(d *decoder, off []*exposure.Frame) (p *repair, lack error) {
	switch {
	case r.opts.Recipe.Repair.Use == useOff:
		return nil, fmt.Errorf("the recipe says `repair: {use: off}`")
	case len(d.darkColumns) == 0:
		return nil, fmt.Errorf("the code has no dark columns to restore them from")
	}
	checks, err := hadamard.NewChecks(d.code.Code(), d.darkColumns)
	if err != nil {
		return nil, err
	}
	if !checks.Reliable() {
		return nil, fmt.Errorf("%d dark columns are too few to restore anything: %d are needed for a code of %d", len(d.darkColumns), neededDark(d.slots), d.slots)
	}
	p, lack = newRepair(checks, d.elementColumns, &d.scale, len(off) == 0, d.code.VarianceUniform())
	if lack == nil && math.Sqrt(p.lost.Growth) > hopelessGrowth {
		lack = fmt.Errorf("restoring them would multiply the noise by %.2g", math.Sqrt(p.lost.Growth))
	}
	if lack != nil {
		p.lost = nil
	}
	return p, lack
}

// neededDark is the least number of dark columns with which anything is repaired.
func neededDark(v int) int { return int(math.Ceil(2 * math.Log2(float64(v)))) }

// scienceRepair is newRepair for the science frames, and says what became of lost rows.
func (r *reduction) scienceRepair(d *decoder) {
	var lack error
	d.repair, lack = r.newRepair(d, r.roles.calibration.off)
	if d.repair == nil && len(d.darkColumns) > 0 && r.opts.Recipe.Repair.Use != useOff {
		r.warn("lost frames are not restored, no error scale is measured, and cosmic rays are looked for in single frames: %v", lack)
	}
	if d.repair == nil && len(r.roles.calibration.off) == 0 && r.optics.stuck.anyOn() {
		r.warn("the light of mirrors stuck on is left in the cube, 1/%.0f of it in every element: there is no all-off frame, and no repair by dark columns that would find it", d.k)
	}
	if d.repair != nil && d.repair.additive {
		r.warn("no error scale is measured: the %s code is no S-matrix, so that errors of seeing, guiding and flexure do not spread evenly over its columns, dark ones among them", r.seq.Family)
	}
	if d.repair != nil && lack == nil {
		d.repair.pursuit = newPursuit(d.repair.left)
	}
	lost := len(d.scale.lost)
	if lost == 0 {
		return
	}
	names := strings.Join(r.missingSteps(), ", ")
	if lack != nil {
		r.degrade("code rows without a frame: %d of %d; they are not restored (%v), so that every voxel is LOST; repeat step %s", lost, d.slots, lack, names)
		return
	}
	growth := math.Sqrt(d.repair.lost.Growth)
	what := fmt.Sprintf("code rows without a frame: %d of %d, restored from the dark columns, which multiplies the noise by %.3g; repeat step %s to do better", lost, d.slots, growth, names)
	if lost > len(d.darkColumns)/4 {
		what += fmt.Sprintf(" (more than a quarter of the %d dark columns is not to be relied on)", len(d.darkColumns))
	}
	if growth > troubledGrowth {
		r.degrade("%s", what)
		return
	}
	r.warn("%s", what)
}

// missingSteps names the science steps whose code row no frame shows.
func (r *reduction) missingSteps() []string {
	var names []string
	for _, step := range r.roles.missing {
		names = append(names, fmt.Sprint(step))
	}
	return names
}

// findLost lists the code rows that no frame of the cycles shows, and their steps.
func (r *roles) findLost(seq *sequence.Sequence, cycles []int) {
	for row, frames := range r.slots {
		if len(frames) == 0 {
			r.lost = append(r.lost, row)
		}
	}
	for _, i := range seq.StepsOf(sequence.Science) {
		if usesCycle(cycles, seq.Steps[i]) && len(r.slots[seq.Steps[i].Row]) == 0 {
			r.missing = append(r.missing, seq.Steps[i].Step)
		}
	}
}

// repairQuality puts what the dark columns told of a sweep into the figures.
func (r *reduction) repairQuality(w *sweep) {
	q := &r.quality
	q.ResidualLight = r.residualLight(w.decoder)
	if w.decoder.repair == nil {
		return
	}
	if w.decoder.repair.restores() {
		growth := math.Sqrt(w.decoder.repair.lost.Growth)
		q.RestoredGrowth = &growth
	}
	if !w.decoder.scales() {
		return
	}
	q.ErrorScale = errorScale(w.quality)
	ratios := w.steps.ratios(w.decoder.repair.share, w.decoder.scale.quiet, w.decoder.scale.meanQuiet())
	for _, i := range r.seq.StepsOf(sequence.Science) {
		one := product.StepChi2{Step: r.seq.Steps[i].Step}
		if v := ratios[r.seq.Steps[i].Row]; !math.IsNaN(v) {
			one.Chi2 = &v
		}
		q.DarkChi2Steps = append(q.DarkChi2Steps, one)
	}
}

func (r *reduction) residualLight(d *decoder) product.ResidualLight {
	switch {
	case len(r.roles.calibration.off) > 0:
		return product.ByAllOff
	case d.repair != nil && d.repair.pedestal && d.lostFlag() != product.FlagLost:
		return product.ByDark
	}
	return product.NotTaken
}
