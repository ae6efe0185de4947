package rehearse

import (
	"context"

	"mirrorloom/pipeline/parallel"
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

// prepareViews works out how each step sees the sources.
func (r *rehearsal) prepareViews(ctx context.Context) error {
	if !r.redraws && r.air == nil {
		return nil
	}
	return parallel.Do(ctx, r.opts.Workers, len(r.steps), func(_, k int) error {
		step := &r.steps[k]
		if step.source < 0 {
			return nil
		}
		if from := &r.sources[step.source]; from.sky {
			step.light = r.optics.viewed(from.light, from.scene, step.view)
		}
		return nil
	})
}

// canvas holds the light of all beams in the mirror rows of a strip, ready to be
// mixed.
type canvas struct {
	// sky never changes; objects may look different in each step.
	sky, objects layered
}

// layered is light by layer, beam and mirror row; a beam that no step uses is
// nil.
type layered [layers][][]density

func (r *rehearsal) redrawSource(ctx context.Context, s *strip, at int, d *drawn, painters []*painter) error {
	from := &r.sources[at]
	c := &canvas{sky: r.newLayered(s, at), objects: r.newLayered(s, at)}
	err := parallel.Do(ctx, r.opts.Workers, len(r.beams.list), func(worker, b int) error {
		if !from.used[b] {
			return nil
		}
		p := painters[worker]
		r.observe(p, s, at, b, d)
		r.fill(p, &c.objects, p.objects, nil, s, from, b)
		r.fill(p, &c.sky, p.sky, from.light.skyLines, s, from, b)
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
		if from.sky && (fresh || r.air != nil || f.seeing != 1 || f.guideU != 0 || f.guideW != 0) {
			if err := r.refill(ctx, c, s, from, step.light, painters); err != nil {
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

func (r *rehearsal) newLayered(s *strip, at int) layered {
	var l layered
	for layer := range layers {
		if !r.hasLayer(layer, at) {
			continue
		}
		l[layer] = make([][]density, len(r.beams.list))
		for b, used := range r.sources[at].used {
			if used {
				l[layer][b] = make([]density, len(s.mirrors))
			}
		}
	}
	return l
}

// fill puts light gathered for a beam, before the instrument's efficiency, into
// its layers; lines are the sky's lines in it. The light is used up.
func (r *rehearsal) fill(p *painter, to *layered, light []density, lines []emitter, s *strip, from *source, b int) {
	r.dim(light, s, b)
	for layer := range to {
		if to[layer] == nil {
			continue
		}
		for k, d := range r.layer(p, layer, light, lines, s, from, b) {
			to[layer][b][k].copy(&d)
		}
	}
}

// refill collects the sources anew for another view of the sky.
func (r *rehearsal) refill(ctx context.Context, c *canvas, s *strip, from *source, light *light, painters []*painter) error {
	return parallel.Do(ctx, r.opts.Workers, len(r.beams.list), func(worker, b int) error {
		if !from.used[b] {
			return nil
		}
		p := painters[worker]
		for k, m := range s.mirrors {
			first, last, keep := r.beams.mirrors(b, m.w, false)
			r.optics.collect(&p.objects[k], light.objects, light.efficiency, m, first, last, keep)
		}
		r.fill(p, &c.objects, p.objects, nil, s, from, b)
		return nil
	})
}

// drawStep mixes the beams in every mirror row and draws the sum, moved by the
// step's drift.
func (r *rehearsal) drawStep(ctx context.Context, c *canvas, s *strip, step *stepPlan, f *fate) ([]float32, error) {
	o := r.optics
	mixed := o.newDensities(len(s.mirrors))
	err := parallel.Do(ctx, r.opts.Workers, len(s.mirrors), func(_, k int) error {
		leaks := r.leaksOn(s.mirrors[k].row)
		rows := c.sky.row(k)
		mix(mixed[k].h, step.mixture, &rows, leaks)
		rows = c.objects.row(k)
		objects := make([]float64, o.axis.n)
		mix(objects, step.mixture, &rows, leaks)
		for i, h := range objects {
			mixed[k].h[i] += h
		}
		mixed[k].from, mixed[k].to = 0, o.axis.n
		return nil
	})
	if err != nil {
		return nil, err
	}
	sums := make([]float32, (s.y1-s.y0)*o.columns)
	kernel := o.spread.shifted(f.shiftX)
	err = parallel.Do(ctx, r.opts.Workers, s.y1-s.y0, func(_, k int) error {
		row := o.rowDrawing(s, k, f.shiftY)
		o.drawRow(sums[k*o.columns:(k+1)*o.columns], &row, mixed, kernel, make([]float64, o.axis.n))
		return nil
	})
	return sums, err
}

// row lists a mirror row's light of all beams; dark ones are nil.
func (l *layered) row(k int) rowsOf[float64] {
	var rows rowsOf[float64]
	for layer := range l {
		if l[layer] == nil {
			continue
		}
		rows[layer] = make([][]float64, len(l[layer]))
		for b, light := range l[layer] {
			if light != nil && light[k].from < light[k].to {
				rows[layer][b] = light[k].h
			}
		}
	}
	return rows
}

// copy makes d the same light as other; it takes its memory when there is light
// for the first time.
func (d *density) copy(other *density) {
	if other.from < other.to && d.h == nil {
		d.h = make([]float64, len(other.h))
	}
	d.clear()
	if other.from < other.to {
		copy(d.h[other.from:other.to], other.h[other.from:other.to])
		d.touch(other.from, other.to)
	}
}
