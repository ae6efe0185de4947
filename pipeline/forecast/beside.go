package forecast

import (
	"context"
	"fmt"
	"math"
	"slices"
)

// cellLight is the light of a cell by detector column, electrons in one science exposure.
type cellLight struct {
	x0                 int
	wanted, light, sky []float64
}

// newCellLight is the light of a cell at columns x0..x1; all: that which is not wanted, too.
func newCellLight(f *fieldLight, w *wanted, c Candidate, k cell, x0, x1 int, all bool) *cellLight {
	n := x1 - x0 + 1
	l := &cellLight{x0, make([]float64, n), make([]float64, n), make([]float64, n)}
	f.element(l.wanted, k.element, k.row, x0, w.of, w.line)
	if all {
		f.element(l.light, k.element, k.row, x0, func(int) bool { return true }, false)
		f.element(l.sky, k.element, k.row, x0, func(source int) bool { return source < 0 }, false)
	}
	for x := range n {
		l.wanted[x] *= c.DwellSeconds
		l.light[x] *= c.DwellSeconds
		l.sky[x] *= c.DwellSeconds
	}
	return l
}

// add adds column x's part of a voxel.
func (l *cellLight) add(v *Voxel, x int, weight float64) {
	v.Wanted += weight * l.wanted[x-l.x0]
	v.Light += weight * l.light[x-l.x0]
	v.Sky += weight * l.sky[x-l.x0]
}

// Where the light is looked at that is not wanted. Of a line: at wavelengths beside its
// window, from the first to the second number of its half widths off the middle (at 2.2, or
// 3.1 sigma, 0.1 % of a Gaussian line is left). Of a band: in a ring about the circle, in
// radii.
const (
	besideFrom, besideTo = 2.2, 5.0
	ringFrom, ringTo     = 1.5, 2.5
)

// Beside are voxels, of weight 1 or the part inside, that tell how much light there is that a
// measurement does not want: those of its circle at wavelengths beside a line, those of a
// ring about it in a band. Sigma is 0. None where the field or the grid has none.
func (l *Light) Beside(ctx context.Context, c Candidate, wanted int) ([]Voxel, error) {
	c, err := l.resolved(c)
	if err != nil {
		return nil, err
	}
	if wanted < 0 || wanted >= len(l.wanted) {
		return nil, fmt.Errorf("there is no measurement %d; the forecast wants %d", wanted, len(l.wanted))
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	field := l.field(c, l.sightOf(l.Time(c)))
	w := &l.wanted[wanted]
	var list []Voxel
	each := func(v Voxel) { list = append(list, v) }
	if !w.line {
		return list, l.lights(ctx, field, c, w, l.ring(w, c), w.fromNM, w.toNM, each)
	}
	cells := l.cells(w, c)
	var most peak
	if err := l.lights(ctx, field, c, w, cells, w.fromNM, w.toNM, most.take); err != nil {
		return nil, err
	}
	middle, half := (w.fromNM+w.toNM)/2, (w.toNM-w.fromNM)/2
	for _, side := range [][2]float64{{middle - besideTo*half, middle - besideFrom*half}, {middle + besideFrom*half, middle + besideTo*half}} {
		if err := l.lights(ctx, field, c, w, cells, side[0], side[1], each); err != nil {
			return nil, err
		}
	}
	return most.even(list), nil
}

// peak is the most light of a line and of the sky in a voxel of a line's window.
type peak struct{ wanted, sky float64 }

func (p *peak) take(v Voxel) { p.wanted, p.sky = max(p.wanted, v.Wanted), max(p.sky, v.Sky) }

// Of the voxels beside a line those are left out that hold more than lineLeft of its peak in
// lines of its source, and those whose sky is above skyEven times the window's: lines of the
// sky may be off by another factor than its continuum.
const (
	lineLeft = 0.05
	skyEven  = 1.3
)

// even is the voxels without lines.
func (p *peak) even(list []Voxel) []Voxel {
	return slices.DeleteFunc(list, func(v Voxel) bool {
		return v.Wanted > lineLeft*p.wanted || v.Sky > skyEven*p.sky
	})
}

// ring is the cells about a measurement's circle, two elements and rows wide at least.
func (l *Light) ring(w *wanted, c Candidate) []cell {
	p := l.profile
	stepU, stepW := p.ArcsecPerU()*float64(c.ElementMirrors), p.ArcsecPerU()/math.Abs(p.Spectrograph.WStepPx)
	inner, outer := *w, *w
	inner.radius = ringFrom * w.radius
	outer.radius = max(ringTo*w.radius, inner.radius+2*max(stepU, stepW))
	near := map[[2]int]float64{}
	for _, k := range l.cells(&inner, c) {
		near[[2]int{k.element, k.row}] = k.area
	}
	for _, k := range l.cells(w, c) {
		near[[2]int{k.element, k.row}] = 1 // of a wide cell the circle may touch a part
	}
	var list []cell
	for _, k := range l.cells(&outer, c) {
		if k.area -= near[[2]int{k.element, k.row}]; k.area > 0 {
			list = append(list, k)
		}
	}
	return list
}

// lights calls each with the light of cells at the grid's voxels in a range of wavelengths,
// those that the detector holds.
func (l *Light) lights(ctx context.Context, f *fieldLight, c Candidate, w *wanted, cells []cell, fromNM, toNM float64, each func(Voxel)) error {
	at := *w
	at.fromNM, at.toNM = fromNM, toNM
	first, parts := l.channels(&at)
	if parts == nil {
		return nil
	}
	s := &sum{light: l, field: f, candidate: c, wanted: w, first: first, parts: parts}
	var buffer []float32
	for _, k := range cells {
		if err := ctx.Err(); err != nil {
			return err
		}
		edges, ok := s.edges(k.element, k.row)
		if !ok {
			continue
		}
		x0, x1 := s.columns(edges)
		light := newCellLight(f, w, c, k, x0, x1, true)
		for i, part := range parts {
			var start int
			start, buffer = l.columns.Weights(buffer[:0], edges[i], edges[i+1])
			v := Voxel{Element: k.element, Row: k.row, Channel: first + i, Weight: k.area * part}
			for at, across := range buffer {
				if x := start + at; x >= x0 && x <= x1 {
					light.add(&v, x, float64(across))
				}
			}
			each(v)
		}
	}
	return nil
}
