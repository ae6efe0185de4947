package rehearse

import (
	"context"
	"math"

	"mirrorloom/pipeline/parallel"
)

// drawn is the light of a strip: either the rows of every beam of every source,
// for each row of the strip, or, where each frame is drawn anew, the sums of
// each step. Where only sources are drawn anew for each step, the rows are the sky's
// alone and objects has the sources.
type drawn struct {
	y0, y1 int
	rows   [][]rowsOf[float32] // [source][y - y0]
	sums   [][]float32         // [step][(y - y0) columns + x], electrons per second
	// objects is as sums; nil for a step without.
	objects [][]float32
	// signal and sky are the truth's voxels, [voxel][y - y0][element].
	signal, sky []float32
}

// painter has the scratch of one goroutine.
type painter struct {
	objects, sky, other []density
	line                []float64
	voxels              *voxelizer
}

// newPainters makes the scratch for strips of so many mirror and detector rows.
func (r *rehearsal) newPainters(s *strip) []*painter {
	list := make([]*painter, r.opts.Workers)
	for i := range list {
		list[i] = r.newPainter(len(s.mirrors), s.y1-s.y0)
	}
	return list
}

func (r *rehearsal) newPainter(mirrors, rows int) *painter {
	o := r.optics
	p := &painter{objects: o.newDensities(mirrors), sky: o.newDensities(mirrors), other: o.newDensities(mirrors), line: make([]float64, o.axis.n)}
	if r.truth != nil {
		p.voxels = o.newVoxelizer(rows, o.profile.Spectrograph.XCenterPx)
	}
	return p
}

// illuminate draws the rows y0 <= y < y1.
func (r *rehearsal) illuminate(ctx context.Context, y0, y1 int) (*drawn, error) {
	o := r.optics
	s := o.newStrip(y0, y1)
	if err := parallel.Do(ctx, r.opts.Workers, len(s.mirrors), func(_, k int) error { o.prepareMirror(s, k); return nil }); err != nil {
		return nil, err
	}
	if err := parallel.Do(ctx, r.opts.Workers, y1-y0, func(_, k int) error { o.prepareRow(s, k); return nil }); err != nil {
		return nil, err
	}
	d := &drawn{y0: y0, y1: y1}
	painters := r.newPainters(s)
	if r.truth != nil {
		voxels := o.profile.Grid.Count * (y1 - y0) * r.beams.n
		d.signal, d.sky = make([]float32, voxels), make([]float32, voxels)
	}
	if r.redraws {
		if err := r.redraw(ctx, s, d, painters); err != nil {
			return nil, err
		}
		return d, nil
	}
	for i := range r.sources {
		rows, err := r.paintSource(ctx, s, i, d, painters)
		if err != nil {
			return nil, err
		}
		d.rows = append(d.rows, rows)
	}
	if r.air != nil {
		if err := r.drawObjects(ctx, s, d, painters); err != nil {
			return nil, err
		}
	}
	return d, nil
}

// paintSource draws all beams of a source, and the truth with the sky's.
func (r *rehearsal) paintSource(ctx context.Context, s *strip, at int, d *drawn, painters []*painter) ([]rowsOf[float32], error) {
	height, count := s.y1-s.y0, len(r.beams.list)
	rows := make([]rowsOf[float32], height)
	for k := range rows {
		for layer := range layers {
			if r.hasLayer(layer, at) {
				rows[k][layer] = make([][]float32, count)
			}
		}
	}
	err := parallel.Do(ctx, r.opts.Workers, count, func(worker, b int) error {
		if !r.sources[at].used[b] {
			return nil
		}
		p := painters[worker]
		r.observe(p, s, at, b, d)
		if r.sources[at].sky && r.air != nil {
			p.objects, p.sky = p.sky, p.objects // each step draws its sources itself
		} else {
			for k := range p.objects {
				p.objects[k].add(&p.sky[k])
			}
		}
		r.dim(p.objects, s, b)
		for layer := range layers {
			if rows[0][layer] == nil {
				continue
			}
			light := r.layer(p, layer, p.objects, r.sources[at].light.skyLines, s, &r.sources[at], b)
			slab := make([]float32, height*r.optics.columns)
			for k := range rows {
				row := slab[k*r.optics.columns : (k+1)*r.optics.columns]
				r.optics.drawRow(row, &s.rows[k], light, r.optics.spread.pixel, p.line)
				rows[k][layer][b] = row
			}
		}
		return nil
	})
	return rows, err
}

// hasLayer tells which layers some fault needs of a source.
func (r *rehearsal) hasLayer(layer, source int) bool {
	_, lines := sizeOf(r.opts.Faults, SkyLines)
	switch layer {
	case layerColour:
		return r.colour != nil && r.sources[source].sky
	case layerLines:
		return lines && r.sources[source].sky && len(r.sources[source].light.skyLines) > 0
	case layerNeighbour:
		return r.beside != nil
	}
	return true
}

// observe gathers the light of a beam, and before that paints the truth of an element:
// what all its mirrors would send, those as well that do not move.
func (r *rehearsal) observe(p *painter, s *strip, at, b int, d *drawn) {
	from := &r.sources[at]
	element := d.signal != nil && at == skySource && b < r.beams.n
	if element {
		r.gather(p, s, from, b, true)
		r.paintVoxels(p, s, b, d)
	}
	if !element || len(r.beams.stuck) > 0 {
		r.gather(p, s, from, b, false)
	}
}

// gather collects a beam's light in all mirror rows of a strip, the sources in
// p.objects and the sky in p.sky; whole as for beams.mirrors.
func (r *rehearsal) gather(p *painter, s *strip, from *source, b int, whole bool) {
	for k, m := range s.mirrors {
		first, last, keep := r.beams.mirrors(b, m.w, whole)
		r.optics.collect(&p.objects[k], from.light.objects, from.light.efficiency, m, first, last, keep)
		r.optics.collect(&p.sky[k], from.light.allSky, from.light.efficiency, m, first, last, keep)
	}
}

// dim applies the instrument's efficiency to a beam's light.
func (r *rehearsal) dim(light []density, s *strip, b int) {
	if r.maps == nil || r.beams.list[b].element < 0 {
		return
	}
	across := r.across(b)
	for k := range light {
		r.maps.apply(&light[k], r.beams.list[b].element, s.mirrors[k], across)
	}
}

// across is the shift in x of a beam's middle.
func (r *rehearsal) across(b int) float64 {
	m := r.beams.list[b]
	return r.optics.geometry.across(float64(m.first+m.last) / 2)
}

// layer gives a layer of a beam's light; lines are the sky's lines in it. The
// result may lie in p.other.
func (r *rehearsal) layer(p *painter, layer int, light []density, lines []emitter, s *strip, from *source, b int) []density {
	across := r.across(b)
	switch layer {
	case layerColour, layerNeighbour:
		w := r.colour
		if layer == layerNeighbour {
			w = r.beside
		}
		for k, m := range s.mirrors {
			w.times(&p.other[k], &light[k], m, across)
		}
		return p.other
	case layerLines:
		for k, m := range s.mirrors {
			first, last, keep := r.beams.mirrors(b, m.w, false)
			r.optics.collect(&p.other[k], lines, from.light.efficiency, m, first, last, keep)
		}
		r.dim(p.other, s, b)
		return p.other
	}
	return light
}

// paintVoxels draws the truth of element j from what gather left.
func (r *rehearsal) paintVoxels(p *painter, s *strip, j int, d *drawn) {
	across := r.across(j)
	height, n := s.y1-s.y0, r.beams.n
	put := func(dst []float32, add bool) {
		light := p.objects
		if !add {
			light = p.sky
		}
		for k, row := range p.voxels.draw(s, light, across) {
			coded := r.codedRow(j, s.y0+k)
			for l, value := range row {
				at := (l*height+k)*n + j
				value *= r.dwell
				if add {
					value += float64(d.sky[at])
				}
				if !coded {
					value = math.NaN()
				}
				dst[at] = float32(value)
			}
		}
	}
	put(d.sky, false)
	put(d.signal, true)
}

// codedRow reports whether the mirror row nearest to a detector row, at x_c,
// follows the code in element j. Beyond the device's rows there is nothing that
// does not.
func (r *rehearsal) codedRow(j, y int) bool {
	s := r.optics.profile.Spectrograph
	w := int(math.Round(r.optics.field.wMiddle + (float64(y)-s.YCenterPx)/s.WStepPx))
	if w < r.optics.wFirst || w > r.optics.wLast {
		return true
	}
	return r.beams.follows(j, 0, w)
}

// add adds other to d.
func (d *density) add(other *density) {
	for i := other.from; i < other.to; i++ {
		d.h[i] += other.h[i]
	}
	d.touch(other.from, other.to)
}
