package skyflux

import (
	"context"
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// window is the voxels around a star, less the sky: [voxel][row][element] of the window.
type window struct {
	j0, y0, elements, rows, voxels int
	reachE, reachR                 float64
	signal, variance               []float32
	good                           []bool
	skyVariance                    []float64 // by voxel
}

// readWindow reads the rows around a star.
func (s *Source) readWindow(ctx context.Context, c *calib.Centroid, reachE, reachR float64, sky *Sky) (*window, error) {
	bound := func(x float64, n int) int { return min(max(int(x), 0), n) }
	j0, j1 := bound(math.Floor(c.Element-reachE-1), s.Elements), bound(math.Ceil(c.Element+reachE+2), s.Elements)
	y0, y1 := bound(math.Floor(c.Row-reachR-1), s.Rows), bound(math.Ceil(c.Row+reachR+2), s.Rows)
	w := &window{j0: j0, y0: y0, elements: j1 - j0, rows: y1 - y0, voxels: s.Voxels, reachE: reachE, reachR: reachR}
	n := w.elements * w.rows
	w.signal, w.variance, w.good, w.skyVariance = make([]float32, n*s.Voxels), make([]float32, n*s.Voxels), make([]bool, n*s.Voxels), make([]float64, s.Voxels)
	strip := &plane{signal: make([]float32, w.rows*s.Elements), variance: make([]float32, w.rows*s.Elements), scratch: make([]float32, w.rows*s.Elements), flags: make([]calib.Flag, w.rows*s.Elements)}
	for l := range s.Voxels {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := s.readRows(strip, l, y0, y1); err != nil {
			return nil, err
		}
		level := 0.0
		if sky != nil {
			level, w.skyVariance[l] = sky.Record.Value[l], sky.Record.Variance[l]
		}
		for y := range w.rows {
			for j := range w.elements {
				from, at := y*s.Elements+j0+j, l*n+y*w.elements+j
				part := 1.0
				if sky != nil && sky.Part != nil {
					part = float64(sky.Part[y0*s.Elements+from])
				}
				w.signal[at], w.variance[at] = float32(float64(strip.signal[from])-part*level), strip.variance[from]
				w.good[at] = strip.good(from) && w.signal[at] == w.signal[at]
			}
		}
	}
	return w, nil
}

// readRows fills p with rows y0..y1-1 of plane l.
func (s *Source) readRows(p *plane, l, y0, y1 int) error {
	if err := s.signal.ReadPlaneRows(p.signal, l, y0, y1); err != nil {
		return err
	}
	if err := s.variance.ReadPlaneRows(p.variance, l, y0, y1); err != nil {
		return err
	}
	if err := s.flags.ReadPlaneRows(p.scratch, l, y0, y1); err != nil {
		return err
	}
	for i, f := range p.scratch {
		p.flags[i] = calib.Flag(f)
	}
	return nil
}

// starShape is a star's place and width, in elements and rows of the cube.
type starShape struct{ element, row, elementSigma, rowSigma float64 }

// track is the star's shape by voxel: that of blocks of wavelengths where they tell it
// well, linear between their middles; that of white light where they do not.
func (w *window) track(white *calib.Centroid) []starShape {
	usual := starShape{white.Element, white.Row, white.ElementSigma, white.RowSigma}
	var places []float64
	var shapes []starShape
	n := w.elements * w.rows
	for b := range starBlocks {
		from, to := b*w.voxels/starBlocks, (b+1)*w.voxels/starBlocks
		sums := newMeans(n)
		for l := from; l < to; l++ {
			noise, some := 0.0, 0.0
			for i := l * n; i < (l+1)*n; i++ {
				if w.good[i] {
					noise, some = noise+float64(w.variance[i]), some+1
				}
			}
			if some > 0 {
				sums.addWindow(w, l, some/noise)
			}
		}
		picture, variance := sums.picture()
		c, err := calib.FitCentroid(picture, variance, w.elements, usual.element-float64(w.j0), usual.row-float64(w.y0), usual.elementSigma, usual.rowSigma, w.elements, w.rows)
		if err != nil || c.ElementErr > surePlace || c.RowErr > surePlace {
			continue
		}
		places = append(places, float64(from+to-1)/2)
		shapes = append(shapes, starShape{c.Element + float64(w.j0), c.Row + float64(w.y0), c.ElementSigma, c.RowSigma})
	}
	out := make([]starShape, w.voxels)
	for l := range out {
		out[l] = usual
		if len(shapes) > 0 {
			out[l] = between(places, shapes, float64(l))
		}
	}
	return out
}

// between is linear between places, and that of the nearest beyond the ends.
func between(places []float64, shapes []starShape, at float64) starShape {
	for k, x := range places {
		if at > x {
			continue
		}
		if k == 0 {
			return shapes[0]
		}
		a, b, t := shapes[k-1], shapes[k], (at-places[k-1])/(x-places[k-1])
		mix := func(a, b float64) float64 { return a + t*(b-a) }
		return starShape{mix(a.element, b.element), mix(a.row, b.row), mix(a.elementSigma, b.elementSigma), mix(a.rowSigma, b.rowSigma)}
	}
	return shapes[len(shapes)-1]
}

// addWindow takes the good voxels of a wavelength, with a weight.
func (m *means) addWindow(w *window, l int, weight float64) {
	n := len(m.sum)
	for i := range n {
		if at := l*n + i; w.good[at] {
			m.sum[i] += weight * float64(w.signal[at])
			m.weight[i] += weight
			m.square[i] += weight * weight * float64(w.variance[at])
		}
	}
}

// leastFraction of a star's light must be in good voxels for a wavelength to count.
const leastFraction = 0.5

// addUp sums the good voxels within the radius, by voxel; the star's shape says what part
// of its light they hold.
func (star *Star) addUp(w *window, shapes []starShape, sky *Sky, correlated float64) {
	n := w.elements * w.rows
	for l, shape := range shapes {
		counts, variance, fraction, places := 0.0, 0.0, 0.0, 0.0
		for i := range n {
			j, y := float64(w.j0+i%w.elements), float64(w.y0+i/w.elements)
			if math.Hypot((j-star.Element)/w.reachE, (y-star.Row)/w.reachR) > 1 || !w.good[l*n+i] {
				continue
			}
			u, v := (j-shape.element)/shape.elementSigma, (y-shape.row)/shape.rowSigma
			fraction += math.Exp(-(u*u+v*v)/2) / (2 * math.Pi * shape.elementSigma * shape.rowSigma)
			counts += float64(w.signal[l*n+i])
			variance += float64(w.variance[l*n+i])
			places++
		}
		variance = correlated*variance + places*places*w.skyVariance[l]
		if sky != nil && math.IsNaN(sky.Record.Value[l]) || fraction < leastFraction {
			counts, variance, fraction = 0, math.Inf(1), 0
		}
		star.Counts, star.Variance, star.Fraction = append(star.Counts, counts), append(star.Variance, variance), append(star.Fraction, min(fraction, 1))
	}
}

// inner is what places see of the sky where that is not known: nothing in the outermost
// rows that hold data, all in the others.
func (s *Source) inner() ([]float32, error) {
	part := make([]float32, s.places())
	p := s.newPlane()
	first, last := s.Rows, -1
	for l := range starBlocks {
		if err := s.read(p, (2*l+1)*s.Voxels/(2*starBlocks)); err != nil {
			return nil, err
		}
		for i, f := range p.flags {
			if f&product.FlagNoData == 0 {
				first, last = min(first, i/s.Elements), max(last, i/s.Elements)
			}
		}
	}
	for i := range part {
		if y := i / s.Elements; y >= first+innerRows && y <= last-innerRows {
			part[i] = 1
		}
	}
	return part, nil
}

// SkyOfStar is the blank sky around a star in a cube that still holds it.
func (s *Source) SkyOfStar(ctx context.Context, o Options) (*Sky, error) {
	part, err := s.inner()
	if err != nil {
		return nil, err
	}
	sky, err := s.MeasureSky(ctx, Names{}, part, 1, o)
	if err != nil {
		return nil, err
	}
	sky.Part = nil // a star lies where all of the sky is seen
	return sky, nil
}
