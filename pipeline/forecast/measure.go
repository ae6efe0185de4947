package forecast

import (
	"math"
)

// pixelNoise is what the formulas say of one pixel's decoded elements, electrons squared in
// one science exposure's units.
type pixelNoise struct {
	// own is the element's variance by part, throughput aside; own.Level is common to all
	// elements, and level what it is made of.
	own   Parts
	level Levels
	// light, overlap and leak are the electrons of the element, of all elements, and of all
	// mirrors when closed.
	light, overlap, leak float64
	// scatter is the standard deviation that the transmission's scatter gives.
	scatter float64
}

func (n *pixelNoise) variance() float64 {
	return n.own.Photons + n.own.Detector + n.own.Dark + n.own.Leak + n.own.Level
}

// window is the pixels that a measurement's elements take light from: rows y0..y1 and columns
// x0..x1 of the detector.
type window struct {
	y0, y1, x0, x1 int
}

func (w *window) size() int       { return (w.y1 - w.y0 + 1) * (w.x1 - w.x0 + 1) }
func (w *window) at(x, y int) int { return (y-w.y0)*(w.x1-w.x0+1) + x - w.x0 }
func (w *window) empty() bool     { return w.y1 < w.y0 || w.x1 < w.x0 }

// measure is the forecast of a measurement; each, if not nil, is called for its voxels.
func (l *Light) measure(f *fieldLight, c Candidate, of taken, index int, each func(Voxel)) Measure {
	w := &l.wanted[index]
	m := Measure{Name: w.name, Line: w.line, FromNM: w.fromNM, ToNM: w.toNM}
	cells := l.cells(w, c)
	s := newSum(l, f, c, of, w, cells)
	for i := 0; i < len(cells); {
		end := i
		for end < len(cells) && cells[end].element == cells[i].element {
			end++
		}
		s.element(cells[i:end], each)
		i = end
	}
	s.finish(&m)
	return m
}

// sum adds up a measurement.
type sum struct {
	light      *Light
	field      *fieldLight
	candidate  Candidate
	noise      *noiseModel
	wanted     *wanted
	first      int // channel
	parts      []float64
	voxels     float64
	snr, count float64 // of voxels, by weight
	signal     float64
	channels   []channelSum
	variance   Parts  // in electrons squared
	levels     Levels // those of variance
	electrons  Electrons
	weight     float64 // of electrons
	// Per pixel of all elements: the weights, their squares, weights times light, squares
	// times light.
	pixels []overlapped
	window window
}

// channelSum adds up the voxels of a wavelength.
type channelSum struct{ snr, count float64 }

// overlapped is what elements share of a pixel.
type overlapped struct{ weight, square, light, squareLight, overlap float64 }

func newSum(l *Light, f *fieldLight, c Candidate, of taken, w *wanted, cells []cell) *sum {
	s := &sum{light: l, field: f, candidate: c, noise: newNoiseModel(l, f, c, of), wanted: w}
	s.first, s.parts = l.channels(w)
	s.channels = make([]channelSum, len(s.parts))
	s.window = window{y0: math.MaxInt, y1: -1, x1: l.camera.columns - 1}
	for _, k := range cells {
		y0, y1 := l.rows.Span(k.row)
		s.window.y0, s.window.y1 = min(s.window.y0, y0), max(s.window.y1, y1)
	}
	if !s.window.empty() {
		s.pixels = make([]overlapped, s.window.size())
	}
	return s
}

// edges are those of the channels of an element on a row, in detector x; ok tells whether the
// detector holds them.
func (s *sum) edges(j, row int) (edges []float64, ok bool) {
	g := s.light.geometry(s.candidate)
	edges = make([]float64, len(s.parts)+1)
	g.EdgesXAt(edges, float64(j), float64(row), s.light.edgesNM[s.first:s.first+len(edges)])
	a, b := edges[0], edges[len(edges)-1]
	if a > b {
		a, b = b, a
	}
	return edges, a >= -0.5 && b <= float64(s.light.camera.columns)-0.5
}

// columns are the first and the last that voxels with these edges take light from.
func (s *sum) columns(edges []float64) (x0, x1 int) {
	const reach = 9 // pixels that a voxel's weights reach beyond its edges
	a, b := min(edges[0], edges[len(edges)-1]), max(edges[0], edges[len(edges)-1])
	return max(int(a)-reach, 0), min(int(b)+reach, s.light.camera.columns-1)
}

// element adds the cells of one element.
func (s *sum) element(cells []cell, each func(Voxel)) {
	j := cells[0].element
	var all [][]float64
	kept := cells[:0:0]
	win := window{y0: math.MaxInt, y1: -1, x0: math.MaxInt, x1: -1}
	for _, k := range cells {
		edges, ok := s.edges(j, k.row)
		if !ok {
			continue
		}
		x0, x1 := s.columns(edges)
		win.x0, win.x1 = min(win.x0, x0), max(win.x1, x1)
		y0, y1 := s.light.rows.Span(k.row)
		win.y0, win.y1 = min(win.y0, y0), max(win.y1, y1)
		kept, all = append(kept, k), append(all, edges)
	}
	if win.empty() {
		return
	}
	noise := s.noise.pixels(j, &win)
	weights := make([]float64, win.size())
	for i, k := range kept {
		s.cell(k, all[i], &win, noise, weights, each)
	}
	scatter := 0.0
	for y := win.y0; y <= win.y1; y++ {
		for x := win.x0; x <= win.x1; x++ {
			at := win.at(x, y)
			g, n := weights[at], &noise[at]
			if g == 0 {
				continue
			}
			square := g * g
			s.variance.Photons += square * n.own.Photons
			s.variance.Detector += square * n.own.Detector
			s.variance.Dark += square * n.own.Dark
			s.variance.Leak += square * n.own.Leak
			s.variance.Level += square * n.own.Level
			s.levels.add(square, &n.level)
			scatter += g * n.scatter
			s.pixel(g, n)
			o := &s.pixels[s.window.at(x, y)]
			o.overlap = n.overlap
			o.weight += g
			o.square += square
			o.light += g * n.light
			o.squareLight += square * n.light
		}
	}
	s.variance.Throughput += scatter * scatter
}

// cell adds the voxels of a cell.
func (s *sum) cell(k cell, edges []float64, win *window, noise []pixelNoise, weights []float64, each func(Voxel)) {
	l := s.light
	light := newCellLight(s.field, s.wanted, s.candidate, k, win.x0, win.x1, each != nil)
	var buffer []float32
	for i, part := range s.parts {
		var first int
		first, buffer = l.columns.Weights(buffer[:0], edges[i], edges[i+1])
		v := Voxel{Element: k.element, Row: k.row, Channel: s.first + i, Weight: k.area * part}
		variance, scatter := 0.0, 0.0
		for at, across := range buffer {
			x := first + at
			if across == 0 || x < win.x0 || x > win.x1 {
				continue
			}
			wx := float64(across)
			light.add(&v, x, wx)
			row, along := l.rows.Weights(k.row, x)
			for d, wy := range along {
				if y := row + d; wy != 0 && y >= win.y0 && y <= win.y1 {
					g, n := wx*float64(wy), &noise[win.at(x, y)]
					variance += g * g * n.variance()
					scatter += g * n.scatter
					weights[win.at(x, y)] += v.Weight * g
				}
			}
		}
		v.Sigma = math.Sqrt(variance + scatter*scatter)
		s.voxels += v.Weight
		s.signal += v.Weight * v.Wanted
		if v.Sigma > 0 {
			s.snr += v.Weight * v.Wanted / v.Sigma
			s.count += v.Weight
			s.channels[i].snr += v.Weight * v.Wanted / v.Sigma
			s.channels[i].count += v.Weight
		}
		if each != nil {
			each(v)
		}
	}
}

// pixel counts a pixel's electrons.
func (s *sum) pixel(weight float64, n *pixelNoise) {
	d := s.candidate.Design()
	s.weight += weight
	s.electrons.Own += weight * n.light
	s.electrons.Overlap += weight * n.overlap
	s.electrons.Frame += weight * (n.overlap*float64(d.K)/float64(d.V) + n.leak + s.noise.dark*s.candidate.DwellSeconds)
}

// finish adds what elements share and makes the measure.
func (s *sum) finish(m *Measure) {
	response := 0.0
	for y := s.window.y0; y <= s.window.y1; y++ {
		for x := s.window.x0; x <= s.window.x1; x++ {
			o := &s.pixels[s.window.at(x, y)]
			s.noise.addShared(&s.variance, &s.levels, x, y, o)
			response += o.light * o.light
		}
	}
	m.Voxels, m.Signal = s.voxels, s.signal
	p := &s.variance
	total := p.Photons + p.Detector + p.Dark + p.Leak + p.Level + p.Throughput
	m.Sigma = math.Sqrt(max(total, 0))
	if m.Sigma > 0 {
		m.SNR = m.Signal / m.Sigma
		for _, v := range []*float64{&p.Photons, &p.Detector, &p.Dark, &p.Leak, &p.Level, &p.Throughput} {
			*v /= total
		}
		s.levels.scale(1 / total)
	}
	m.Variance, m.Levels, m.ResponseSigma = *p, s.levels, math.Sqrt(response)/100
	m.Spectrum = []Channel{}
	for i, c := range s.channels {
		if c.count > 0 {
			nm := (s.light.edgesNM[s.first+i] + s.light.edgesNM[s.first+i+1]) / 2
			m.Spectrum = append(m.Spectrum, Channel{nm, c.snr / c.count})
		}
	}
	if s.count > 0 {
		m.VoxelSNR = s.snr / s.count
	}
	if s.weight > 0 {
		m.Electrons = Electrons{
			Own: s.electrons.Own / s.weight, Overlap: s.electrons.Overlap / s.weight, Frame: s.electrons.Frame / s.weight,
		}
	}
	if s.voxels > 0 {
		m.Electrons.Wanted = s.signal / s.voxels
	}
}
