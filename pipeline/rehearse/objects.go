package rehearse

import (
	"context"

	"mirrorloom/pipeline/parallel"
)

// drawObjects draws the sources' light in each step of a strip, where air moves and dims
// them anew from step to step while all else stands still: the rows of d hold the sky.
// Each step gathers what its beams send on, and draws the sum once.
func (r *rehearsal) drawObjects(ctx context.Context, s *strip, d *drawn, painters []*painter) error {
	d.objects = make([][]float32, len(r.steps))
	return parallel.Do(ctx, r.opts.Workers, len(r.steps), func(worker, k int) error {
		if step := &r.steps[k]; step.light != nil {
			d.objects[k] = r.drawObjectsOf(s, step, painters[worker])
		}
		return nil
	})
}

func (r *rehearsal) drawObjectsOf(s *strip, step *stepPlan, p *painter) []float32 {
	o := r.optics
	for k, m := range s.mirrors {
		mixed := &p.objects[k]
		mixed.clear()
		leaks := r.leaksOn(m.row)
		for i, b := range step.mixture.open {
			neighbours := 0.0
			if step.mixture.neighbours != nil {
				neighbours = step.mixture.neighbours[i] / 2
			}
			r.addBeam(p, mixed, step, m, b, 1, neighbours)
		}
		for _, b := range step.mixture.shut {
			r.addBeam(p, mixed, step, m, b, leaks[b], 0)
		}
	}
	sums := make([]float32, (s.y1-s.y0)*o.columns)
	for k := range s.rows {
		o.drawRow(sums[k*o.columns:(k+1)*o.columns], &s.rows[k], p.objects, o.spread.pixel, p.line)
	}
	return sums
}

// addBeam adds a beam's light of the sources in a mirror row to mixed: weight times all
// of it and its slope over the band, and what opening its neighbours adds.
func (r *rehearsal) addBeam(p *painter, mixed *density, step *stepPlan, m *mirrorRow, b int, weight, neighbours float64) {
	first, last, keep := r.beams.mirrors(b, m.w, false)
	if first > last {
		return
	}
	light, layer := &p.sky[0], &p.other[0]
	r.optics.collect(light, step.light.objects, step.light.efficiency, m, first, last, keep)
	if light.from >= light.to {
		return
	}
	across := r.across(b)
	if r.maps != nil && r.beams.list[b].element >= 0 {
		r.maps.apply(light, r.beams.list[b].element, m, across)
	}
	mixed.addTimes(light, weight)
	if w := weight * step.mixture.colour; w != 0 {
		r.colour.times(layer, light, m, across)
		mixed.addTimes(layer, w)
	}
	if neighbours != 0 {
		r.beside.times(layer, light, m, across)
		mixed.addTimes(layer, neighbours)
	}
}

// addTimes adds a multiple of other to d.
func (d *density) addTimes(other *density, weight float64) {
	for i := other.from; i < other.to; i++ {
		d.h[i] += weight * other.h[i]
	}
	d.touch(other.from, other.to)
}
