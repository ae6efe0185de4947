package reduce

import (
	"math"
	"slices"

	"mirrorloom/pipeline/sequence"
)

// stuckRow is the work on one element in one row.
type stuckRow struct {
	l    *stuckLight
	y, j int
	// elements are those whose light is looked at, first..last; mirror rows from..to feed
	// them there.
	first, last, from, to int
	strips                []mirrorStrip // [element][w]
	missing               []missingLight
	data                  []lightDatum
	own                   int          // of data: the row's own
	seen                  []seenDatum  // [column][datum]
	values                []float64    // of the data at a column
	within                []float64    // covariances of strips, [strip][strip]
	geometries            []geometryAt // by shift of the trace
	level, strength       []float64    // of a mirror's light, by column: its mean and A^2
}

// lightDatum is the light of an element in a row: at column x, the pixel x + shift is of
// the same wavelength.
type lightDatum struct {
	element, y int
	row        *decodedRow
	shift      float64
}

// seenDatum is the light of a datum at a column and how many mirrors' it holds; not ok
// where pixels are bad or off the detector.
type seenDatum struct {
	value, variance, mirrors float64
	ok                       bool
}

// mirrorStrip is the mirrors of an element in a mirror row that follow the code.
type mirrorStrip struct {
	element, w int
	row        float64
	us         []int
}

// missingLight are the mirrors of one u that do not move.
type missingLight struct {
	offset float64 // of its light along x from the element's middle, px
	u      int
	ws     []int
	rows   []float64
}

func newStuckRow(l *stuckLight, w *window, y, j int) *stuckRow {
	r := &stuckRow{l: l, y: y, j: j, first: max(0, j-lightElements), last: min(len(l.elements)-1, j+lightElements)}
	low, high := bounds(l.trace)
	r.from, r.to = l.reaching(float64(y-lightRows)-high, float64(y+lightRows)-low)
	for j := r.first; j <= r.last; j++ {
		for w := r.from; w <= r.to; w++ {
			r.addStrip(j, w)
		}
	}
	r.collect(w)
	r.relate()
	return r
}

// addStrip adds the mirrors of an element in a mirror row, those that lack apart.
func (r *stuckRow) addStrip(j, w int) {
	l, e := r.l, &r.l.elements[j]
	s := mirrorStrip{element: j, w: w, row: l.row(w)}
	defer func() { r.strips = append(r.strips, s) }()
	if l.useless(e, w) {
		return
	}
	for u := e.First; u <= e.Last; u++ {
		if _, _, ok := mirrorAt(l.seq.Profile, u, w); !ok {
			continue
		}
		switch {
		case !slices.ContainsFunc(e.missing, func(m sequence.PlacedMirror) bool { return m.U == u && m.W == w }):
			s.us = append(s.us, u)
		case j == r.j:
			r.miss(u, w, s.row)
		}
	}
}

// miss adds a mirror to the missing ones of its u.
func (r *stuckRow) miss(u, w int, row float64) {
	at := slices.IndexFunc(r.missing, func(m missingLight) bool { return m.u == u })
	if at < 0 {
		e := &r.l.elements[r.j]
		middle := float64(e.First+e.Last) / 2
		at = len(r.missing)
		r.missing = append(r.missing, missingLight{u: u, offset: (float64(u) - middle) * r.l.pitch()})
	}
	m := &r.missing[at]
	m.ws, m.rows = append(m.ws, w), append(m.rows, row)
}

// pitch is the distance on the detector of neighbouring u, px.
func (l *stuckLight) pitch() float64 {
	return l.geometry.X_e / float64(l.seq.ElementMirrors())
}

// collect finds the data and looks at them in every column.
func (r *stuckRow) collect(w *window) {
	g := r.l.geometry
	slant := func(y int) float64 { q := float64(y) - g.Y_c; return q * (g.SlitTilt + g.Smile*q) }
	top := w.first()
	for j := r.first; j <= r.last; j++ {
		for y := max(top, r.y-lightRows); y <= min(top+len(w.rows)-1, r.y+lightRows); y++ {
			if j == r.j && y == r.y {
				r.own = len(r.data)
			}
			r.data = append(r.data, lightDatum{
				element: j, y: y, row: w.rows[y-top],
				shift: float64(j-r.j)*g.X_e + slant(y) - slant(r.y),
			})
		}
	}
	n := len(r.data)
	r.seen, r.values = make([]seenDatum, n*len(r.l.trace)), make([]float64, n)
	for i := range r.data {
		d := &r.data[i]
		for x, shift := range r.l.trace {
			s := &r.seen[x*n+i]
			s.value, s.ok = r.value(d, x, 0)
			s.variance = d.varianceAt(float64(x) + d.shift)
			s.ok = s.ok && s.variance > 0
			s.mirrors = r.mirrors(d, shift)
		}
	}
}

// column is the data at a column.
func (r *stuckRow) column(x int) []seenDatum {
	n := len(r.data)
	return r.seen[x*n : (x+1)*n]
}

// strip is the mirrors of an element in a mirror row from..to.
func (r *stuckRow) strip(element, w int) int {
	return (element-r.first)*(r.to-r.from+1) + w - r.from
}

// reached are the mirror rows whose light a datum holds where the trace is shifted so.
func (r *stuckRow) reached(d *lightDatum, shift float64) (from, to int) {
	from, to = r.l.reaching(float64(d.y)-shift, float64(d.y)-shift)
	return max(from, r.from), min(to, r.to)
}

// mirrors is how many mirrors' light a datum holds.
func (r *stuckRow) mirrors(d *lightDatum, shift float64) float64 {
	sum := 0.0
	from, to := r.reached(d, shift)
	for w := from; w <= to; w++ {
		s := &r.strips[r.strip(d.element, w)]
		sum += float64(len(s.us)) * r.l.share(float64(d.y)-shift-s.row)
	}
	return sum
}

// lacks is how many mirrors' light of missing[k] the row lacks.
func (r *stuckRow) lacks(k int, shift float64) float64 {
	sum := 0.0
	for _, row := range r.missing[k].rows {
		sum += r.l.share(float64(r.y) - shift - row)
	}
	return sum
}

// valuesAt are the data at a column as a mirror at an offset along x would have them, NaN
// where they are not ok; valid until the next call.
func (r *stuckRow) valuesAt(x int, offset float64) []float64 {
	for i, d := range r.column(x) {
		r.values[i] = d.value
		if offset != 0 {
			r.values[i], d.ok = r.value(&r.data[i], x, offset)
		}
		if !d.ok {
			r.values[i] = math.NaN()
		}
	}
	return r.values
}

// value is the light of a datum as a mirror at an offset along x would have it. The
// element's light is spread over its width along x, and a mirror's is not: a second
// derivative takes the spread out.
func (r *stuckRow) value(d *lightDatum, x int, offset float64) (value float64, ok bool) {
	at := float64(x) + d.shift - offset
	i := int(math.Floor(at))
	signal := d.row.signal[d.element]
	if i < 1 || i+2 >= len(signal) {
		return 0, false
	}
	if own := d.row.own; own[i-1]|own[i]|own[i+1]|own[i+2] != 0 {
		return 0, false
	}
	f := at - float64(i)
	a, b, c, e := float64(signal[i-1]), float64(signal[i]), float64(signal[i+1]), float64(signal[i+2])
	// Lagrange's polynomial through four pixels (Abramowitz & Stegun 25.2.13).
	value = -f*(f-1)*(f-2)/6*a + (f+1)*(f-1)*(f-2)/2*b - (f+1)*f*(f-2)/2*c + (f+1)*f*(f-1)/6*e
	if offset != 0 {
		value -= r.l.width() / 2 * ((1-f)*(a-2*b+c) + f*(b-2*c+e))
	}
	return value, value == value
}

// width is the variance of an element's mirrors along x, px^2.
func (l *stuckLight) width() float64 {
	n := float64(l.seq.ElementMirrors())
	return l.pitch() * l.pitch() * (n*n - 1) / 12
}

// varianceAt is the variance at a place along x, 0 off the detector.
func (d *lightDatum) varianceAt(x float64) float64 {
	v := d.row.variance[min(d.element, len(d.row.variance)-1)]
	i := int(math.Floor(x))
	if i < 0 || i+1 >= len(v) {
		return 0
	}
	f := x - float64(i)
	return (1-f)*float64(v[i]) + f*float64(v[i+1])
}
