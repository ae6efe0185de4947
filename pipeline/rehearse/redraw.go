package rehearse

import (
	"context"
)

// redraw draws each step of a strip by itself, where seeing, guiding or flexure
// change what no sum of fixed beams can give. First the beams are summed in each
// mirror row, then the sum is drawn: a step costs as much as one beam, but for
// the sources that have to be collected anew.
func (r *rehearsal) redraw(ctx context.Context, s *strip, d *drawn, painters []*painter) error {
	d.sums = make([][]float32, len(r.steps))
	for i := range r.sources {
		if err := r.redrawSource(ctx, s, i, d, painters); err != nil {
			return err
		}
	}
	return nil
}

// canvas holds the light of all beams in the mirror rows of a strip.
type canvas struct {
	// sky is the sky's part before the instrument's efficiency; it never
	// changes.
	sky [][]density // [beam][mirror row]
	// light is all of a beam by layer, ready to be mixed.
	light [layers][][]density
}

func (r *rehearsal) redrawSource(ctx context.Context, s *strip, at int, d *drawn, painters []*painter) error {
	from := &r.sources[at]
	c := r.newCanvas(s, at)
	err := parallel(ctx, r.opts.Workers, len(r.beams.list), func(worker, b int) error {
		if !from.used[b] {
			return nil
		}
		p := painters[worker]
		r.gather(p, s, from, b)
		if d.signal != nil && from.sky && b < r.beams.n {
			r.paintVoxels(p, s, b, d)
		}
		for k := range p.sky {
			c.sky[b][k].copy(&p.sky[k])
		}
		r.fill(p, c, s, from, b)
		return nil
	})
	if err != nil {
		return err
	}
	fresh := false // whether the canvas shows another seeing than the scene's
	for k := range r.steps {
		step := &r.steps[k]
		if step.source != at {
			continue
		}
		f := &r.fates[k]
		if from.sky && (fresh || f.seeing != 1 || f.guideU != 0 || f.guideW != 0) {
			if err := r.refill(ctx, c, s, from, step.view, painters); err != nil {
				return err
			}
			fresh = true
		}
		sums, err := r.drawStep(ctx, c, s, step, f)
		if err != nil {
			return err
		}
		d.sums[k] = sums
	}
	return nil
}

func (r *rehearsal) newCanvas(s *strip, at int) *canvas {
	c := &canvas{sky: make([][]density, len(r.beams.list))}
	for layer := range layers {
		if r.hasLayer(layer, at) {
			c.light[layer] = make([][]density, len(r.beams.list))
		}
	}
	for b, used := range r.sources[at].used {
		if !used {
			continue
		}
		c.sky[b] = r.optics.newDensities(len(s.mirrors))
		for layer := range c.light {
			if c.light[layer] != nil {
				c.light[layer][b] = r.optics.newDensities(len(s.mirrors))
			}
		}
	}
	return c
}

// fill puts the light gathered in p, sky still apart, into a beam's layers.
func (r *rehearsal) fill(p *painter, c *canvas, s *strip, from *source, b int) {
	r.finish(p.objects, c.sky[b], s, b)
	for layer := range c.light {
		if c.light[layer] == nil {
			continue
		}
		for k, d := range r.layer(p, layer, s, from, b) {
			c.light[layer][b][k].copy(&d)
		}
	}
}

// refill collects the sources anew for another view of the sky.
func (r *rehearsal) refill(ctx context.Context, c *canvas, s *strip, from *source, v viewing, painters []*painter) error {
	light := r.optics.newSkyLight(r.scene, v)
	return parallel(ctx, r.opts.Workers, len(r.beams.list), func(worker, b int) error {
		if !from.used[b] {
			return nil
		}
		p := painters[worker]
		for k, m := range s.mirrors {
			first, last, keep := r.beams.mirrors(b, m.w)
			r.optics.collect(&p.objects[k], light.objects, light.efficiency, m, first, last, keep)
		}
		r.fill(p, c, s, from, b)
		return nil
	})
}

// drawStep mixes the beams in every mirror row and draws the sum, moved by the
// step's drift.
func (r *rehearsal) drawStep(ctx context.Context, c *canvas, s *strip, step *stepPlan, f *fate) ([]float32, error) {
	o := r.optics
	mixed := o.newDensities(len(s.mirrors))
	err := parallel(ctx, r.opts.Workers, len(s.mirrors), func(_, k int) error {
		var rows rowsOf[float64]
		for layer := range c.light {
			if c.light[layer] == nil {
				continue
			}
			rows[layer] = make([][]float64, len(r.beams.list))
			for b := range c.light[layer] {
				if c.light[layer][b] != nil && c.light[layer][b][k].from < c.light[layer][b][k].to {
					rows[layer][b] = c.light[layer][b][k].h
				}
			}
		}
		mix(mixed[k].h, step.mixture, &rows, r.leaksOn(s.mirrors[k].row))
		mixed[k].from, mixed[k].to = 0, o.axis.n
		return nil
	})
	if err != nil {
		return nil, err
	}
	sums := make([]float32, (s.y1-s.y0)*o.columns)
	kernel := o.spread.shifted(f.shiftX)
	err = parallel(ctx, r.opts.Workers, s.y1-s.y0, func(_, k int) error {
		row := o.rowDrawing(s, k, f.shiftY)
		o.drawRow(sums[k*o.columns:(k+1)*o.columns], &row, mixed, kernel, make([]float64, o.axis.n))
		return nil
	})
	return sums, err
}

// copy makes d the same light as other.
func (d *density) copy(other *density) {
	d.clear()
	if other.from < other.to {
		copy(d.h[other.from:other.to], other.h[other.from:other.to])
		d.touch(other.from, other.to)
	}
}
