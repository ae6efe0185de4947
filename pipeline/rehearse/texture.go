package rehearse

import "math"

// waves is a smooth random field over (element, row) or (element, wavelength),
// mean about 0 and rms 1: a sum of a few long waves. Both arguments run over
// about 0..1.
type waves struct {
	a, b, phase [4]float64
}

// newWaves draws waves of up to `cycles` periods over the second argument.
func newWaves(seed uint64, purpose string, cycles float64) *waves {
	pcg := newStream(seed, purpose, 0, 0)
	w := &waves{}
	for k := range w.a {
		w.a[k] = within(pcg, 2)
		w.b[k] = cycles * (0.4 + 0.6*uniform(pcg))
		w.phase[k] = uniform(pcg)
	}
	return w
}

func (w *waves) at(s, t float64) float64 {
	sum := 0.0
	for k := range w.a {
		sum += math.Sin(2 * math.Pi * (w.a[k]*s + w.b[k]*t + w.phase[k]))
	}
	return sum / math.Sqrt2
}

// Sizes of what a real instrument adds to the light's way.
const (
	slitRMS    = 0.02  // slit function of element and row
	wiggleRMS  = 0.015 // efficiency of element and wavelength
	wiggleLong = 60.0  // shortest period of the efficiency's wiggles, px
	leakRMS    = 0.2   // of the leak's structure
)

// efficiencyMap is the slit function and the efficiency wiggles of all
// elements: factors of the light of an element.
type efficiencyMap struct {
	o    *optics
	n    int
	slit *waves
	// slitMean is that of the slit function before it is divided out.
	slitMean float64
	// wiggles[j][k] is the factor at dispersed distance pxFrom + k.
	wiggles [][]float64
}

// newEfficiencyMap draws the factors.
func (o *optics) newEfficiencyMap(seed uint64, b *beams) *efficiencyMap {
	n := b.n
	m := &efficiencyMap{o: o, n: n, slit: newWaves(seed, "slit function", 2)}
	span := o.pxTo - o.pxFrom
	w := newWaves(seed, "efficiency", span/wiggleLong)
	for j := range n {
		list := make([]float64, int(span)+3)
		for k := range list {
			list[k] = 1 + wiggleRMS*w.at(float64(j)/float64(n), float64(k)/span)
		}
		m.wiggles = append(m.wiggles, list)
	}
	m.normalise(b)
	return m
}

// normalise gives both factors a mean of 1 over the field - the mirrors that follow
// the code - and the grid's band: the profile's throughput is that of the whole, and
// no lamp can tell how dark mirrors would have done.
func (m *efficiencyMap) normalise(b *beams) {
	o := m.o
	g := o.profile.Grid
	from := o.geometry.dispersed(g.WavelengthNM(-0.5)) - o.pxFrom
	to := o.geometry.dispersed(g.WavelengthNM(float64(g.Count)-0.5)) - o.pxFrom
	if from > to {
		from, to = to, from
	}
	sum, count := 0.0, 0
	for _, list := range m.wiggles {
		for k := max(0, int(from)); k <= min(len(list)-1, int(to)); k++ {
			sum += list[k]
			count++
		}
	}
	for _, list := range m.wiggles {
		for k := range list {
			list[k] *= float64(count) / sum
		}
	}
	m.slitMean = o.fieldMean(b, func(s, t float64) float64 { return 1 + slitRMS*m.slit.at(s, t) })
}

// fieldMean is the mean over the mirrors that follow the code of a function of the
// element and the detector row, in parts of all elements and all rows.
func (o *optics) fieldMean(b *beams, f func(s, t float64) float64) float64 {
	sum, count := 0.0, 0
	for j := range b.n {
		for w := o.wFirst; w <= o.wLast; w++ {
			if b.follows(j, 0, w) {
				sum += f(float64(j)/float64(b.n), o.geometry.row(w)/float64(o.rows))
				count++
			}
		}
	}
	return sum / float64(max(count, 1))
}

// apply multiplies the light of element j in a mirror row.
func (m *efficiencyMap) apply(d *density, j int, row *mirrorRow, across float64) {
	o := m.o
	slit := (1 + slitRMS*m.slit.at(float64(j)/float64(m.n), row.row/float64(o.rows))) / m.slitMean
	list := m.wiggles[j]
	for i := d.from; i < d.to; i++ {
		at := row.start[i] - across - o.pxFrom
		k := min(max(int(at), 0), len(list)-2)
		d.h[i] *= slit * (list[k] + (list[k+1]-list[k])*(at-float64(k)))
	}
}

// weights are factors of the light by dispersed distance, every px from pxFrom:
// those of a layer.
type weights struct {
	o    *optics
	list []float64
}

// newWeights tabulates a function of the wavelength; where no wavelength is
// dispersed so far it is 0.
func (o *optics) newWeights(f func(nm float64) float64) *weights {
	w := &weights{o: o, list: make([]float64, int(o.pxTo-o.pxFrom)+3)}
	for k := range w.list {
		if nm, ok := o.geometry.wavelength(o.pxFrom + float64(k)); ok {
			w.list[k] = f(nm)
		}
	}
	return w
}

// times writes src times the weights to dst.
func (w *weights) times(dst, src *density, row *mirrorRow, across float64) {
	dst.clear()
	for i := src.from; i < src.to; i++ {
		at := row.start[i] - across - w.o.pxFrom
		k := min(max(int(at), 0), len(w.list)-2)
		dst.h[i] = src.h[i] * (w.list[k] + (w.list[k+1]-w.list[k])*(at-float64(k)))
	}
	dst.touch(src.from, src.to)
}

// colourWeight is a wavelength's place in the grid, -1/2 at its first edge and
// 1/2 at its last.
func (o *optics) colourWeight(nm float64) float64 {
	g := o.profile.Grid
	return (nm-g.WavelengthNM(-0.5))/g.SpanNM() - 0.5
}

// leakMap is the structure of what shut mirrors leak: a factor of 20 % rms over the
// field and mean 1 over the mirrors that follow the code.
type leakMap struct {
	field *waves
	mean  float64
}

func (o *optics) newLeakMap(seed uint64, b *beams) *leakMap {
	m := &leakMap{field: newWaves(seed, "leak", 2), mean: 1}
	m.mean = o.fieldMean(b, m.at)
	return m
}

func (m *leakMap) at(s, t float64) float64 { return max(1+leakRMS*m.field.at(s, t), 0) / m.mean }

// leaks is what shut beams leak, by beam, at detector row y of so many: size times
// the structure.
func (b *beams) leaks(size float64, m *leakMap, y float64, rows int) []float64 {
	list := make([]float64, len(b.list))
	for i, beam := range b.list {
		list[i] = size
		if beam.element >= 0 {
			list[i] *= m.at(float64(beam.element)/float64(b.n), y/float64(rows))
		}
	}
	return list
}
