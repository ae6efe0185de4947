package reduce

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib"
	"mirrorloom/pipeline/sequence"
)

// Pixels mix some mirror rows, and the light of one that does not move differs from that
// of the others where a source is small: no factor gives an element its light back.
// What is missing is estimated, pixel by pixel, from the decoded light of the element and
// its neighbours within lightRows rows, by calib.MissingLight. Its prior is a field that
// is smooth over lightLength spots, its strength the scatter of that light.
const (
	lightRows     = 5
	lightElements = 1
	// lightLength is the correlation length in standard deviations of a spot: images are
	// no sharper than optics that are made for them.
	lightLength = 1.5
	// lightStep is how finely, in rows, the trace's shift is told apart by the weights;
	// sums of mirrors are those of the shift itself.
	lightStep = 0.125
	// lightScatter is how far elements' responses differ, which are not yet divided out.
	lightScatter = 0.02
)

// wholeElement is the light of an element in a row, with what its mirrors lack put in.
type wholeElement struct {
	element int
	// signal takes the place of the row's; extra is added to its variance.
	signal, extra []float32
}

// stuckLight restores the light of elements row by row.
type stuckLight struct {
	*stuckMirrors
	geometry *calib.Geometry
	trace    []float64 // by column
	shares   []float64 // RowShare every 1/shareSteps from -reach
	reach    float64
	length   float64 // of the correlation, in u
	uniform  bool
}

const shareSteps = 512

func newStuckLight(s *stuckMirrors, g *calib.Geometry, columns int, uniform bool) *stuckLight {
	if s == nil || !slices.ContainsFunc(s.elements, func(e stuckElement) bool { return len(e.missing) > 0 }) {
		return nil
	}
	p := s.seq.Profile
	l := &stuckLight{stuckMirrors: s, geometry: g, reach: spreadReach(p), uniform: uniform}
	for x := range columns {
		l.trace = append(l.trace, g.TraceShift(float64(x)))
	}
	for i := range int(2*l.reach*shareSteps) + 2 {
		l.shares = append(l.shares, calib.RowShare(float64(i)/shareSteps-l.reach, p.Spectrograph.LSFFWHMPx))
	}
	l.length = lightLength * p.Spectrograph.LSFFWHMPx / fwhmPerSigma / math.Abs(p.Spectrograph.WStepPx)
	return l
}

// share is calib.RowShare by the table.
func (l *stuckLight) share(d float64) float64 {
	at := (d + l.reach) * shareSteps
	if !(at >= 0 && at < float64(len(l.shares)-1)) {
		return 0
	}
	i := int(at)
	return l.shares[i] + (l.shares[i+1]-l.shares[i])*(at-float64(i))
}

// affected lists the elements that lack light in a detector row.
func (l *stuckLight) affected(y int) []int {
	if l == nil {
		return nil
	}
	low, high := bounds(l.trace)
	var list []int
	for j := range l.elements {
		if slices.ContainsFunc(l.elements[j].missing, func(m sequence.PlacedMirror) bool {
			d := float64(y) - l.row(m.W)
			return d-high < l.reach && d-low > -l.reach
		}) {
			list = append(list, j)
		}
	}
	return list
}

func bounds(x []float64) (low, high float64) { return slices.Min(x), slices.Max(x) }

// stuckRow is the work on one element in one row.
type stuckRow struct {
	l        *stuckLight
	y, j     int
	data     []lightDatum
	own      int // of data: the row's own
	strips   []mirrorStrip
	missing  []missingLight // by u
	within   *mat.SymDense  // covariances of the strips
	weights  map[weightKey]*lightWeights
	value    []float64 // of the data at a column, per mirror
	level    []float64 // of the light, by column, a mirror's
	strength []float64 // A^2, by column
}

// lightDatum is the light of an element in a row: at column x, the pixel x + shift is of
// the same wavelength.
type lightDatum struct {
	element, y int
	row        *decodedRow
	shift      float64
	own        bool
}

// mirrorStrip is mirrors of an element in a mirror row that follow the code.
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

type weightKey struct{ trace, noise, missing int }

type lightWeights struct {
	c         []float64
	structure float64
}

// restore gives the element j of row y its light back; rows are the window's.
func (l *stuckLight) restore(w *window, y, j int) wholeElement {
	r := &stuckRow{l: l, y: y, j: j, weights: map[weightKey]*lightWeights{}}
	r.collect(w)
	r.measure()
	row := w.rows[y-w.first()]
	out := wholeElement{element: j, signal: slices.Clone(row.signal[j]), extra: make([]float32, len(l.trace))}
	add, extra := r.estimate()
	for x := range out.signal {
		out.signal[x] += float32(add[x])
		out.extra[x] = float32(extra[x])
	}
	return out
}

// collect finds the data, the mirrors in them, and those that are missing.
func (r *stuckRow) collect(w *window) {
	l, g := r.l, r.l.geometry
	slant := func(y int) float64 { q := float64(y) - g.Y_c; return q * (g.SlitTilt + g.Smile*q) }
	first := w.first()
	for j := max(0, r.j-lightElements); j <= min(len(l.elements)-1, r.j+lightElements); j++ {
		for y := max(0, r.y-lightRows); y <= r.y+lightRows; y++ {
			if y-first < 0 || y-first >= len(w.rows) {
				continue
			}
			if j == r.j && y == r.y {
				r.own = len(r.data)
			}
			r.data = append(r.data, lightDatum{
				element: j, y: y, row: w.rows[y-first], own: j == r.j && y == r.y,
				shift: float64(j-r.j)*g.X_e + slant(y) - slant(r.y),
			})
		}
	}
	low, high := bounds(l.trace)
	from, to := l.reaching(float64(r.y-lightRows)-high, float64(r.y+lightRows)-low)
	for j := max(0, r.j-lightElements); j <= min(len(l.elements)-1, r.j+lightElements); j++ {
		for w := from; w <= to; w++ {
			r.addStrip(j, w)
		}
	}
	n := len(r.strips)
	r.within = mat.NewSymDense(max(n, 1), nil)
	for a := range n {
		for b := a; b < n; b++ {
			sum := 0.0
			for _, u := range r.strips[a].us {
				for _, v := range r.strips[b].us {
					sum += l.covariance(u-v, r.strips[a].w-r.strips[b].w)
				}
			}
			r.within.SetSym(a, b, sum)
		}
	}
}

// addStrip adds the mirrors of an element in a mirror row, those that lack apart.
func (r *stuckRow) addStrip(j, w int) {
	l, e := r.l, &r.l.elements[j]
	if l.useless(e, w) {
		return
	}
	s := mirrorStrip{element: j, w: w, row: l.row(w)}
	for u := e.First; u <= e.Last; u++ {
		if _, _, ok := mirrorAt(l.seq.Profile, u, w); !ok {
			continue
		}
		if !slices.ContainsFunc(e.missing, func(m sequence.PlacedMirror) bool { return m.U == u && m.W == w }) {
			s.us = append(s.us, u)
			continue
		}
		if j != r.j {
			continue
		}
		at := slices.IndexFunc(r.missing, func(m missingLight) bool { return m.u == u })
		if at < 0 {
			at = len(r.missing)
			middle := float64(e.First+e.Last) / 2
			r.missing = append(r.missing, missingLight{u: u, offset: (float64(u) - middle) * l.pitch()})
		}
		r.missing[at].ws = append(r.missing[at].ws, w)
		r.missing[at].rows = append(r.missing[at].rows, s.row)
	}
	if len(s.us) > 0 {
		r.strips = append(r.strips, s)
	}
}

// pitch is the distance on the detector of neighbouring u, px.
func (l *stuckLight) pitch() float64 {
	return l.geometry.X_e / float64(l.seq.ElementMirrors())
}

// covariance of the light of two mirrors, in units of its variance.
func (l *stuckLight) covariance(du, dw int) float64 {
	return math.Exp(-float64(du*du+dw*dw) / (2 * l.length * l.length))
}

// mirrors is how many mirrors' light a datum holds where the trace is shifted so.
func (r *stuckRow) mirrors(d *lightDatum, shift float64) float64 {
	sum := 0.0
	for i := range r.strips {
		if s := &r.strips[i]; s.element == d.element {
			sum += float64(len(s.us)) * r.l.share(float64(d.y)-shift-s.row)
		}
	}
	return sum
}

// lacks is how many mirrors' light is missing.
func (r *stuckRow) lacks(m *missingLight, shift float64) float64 {
	sum := 0.0
	for _, row := range m.rows {
		sum += r.l.share(float64(r.y) - shift - row)
	}
	return sum
}

// datum is the light of a datum as a mirror at an offset along x would have it, and the
// variance; false where pixels are bad or off the detector. The element's light is spread
// over its width along x, and a mirror's is not: a second derivative takes the spread
// out.
func (r *stuckRow) datum(d *lightDatum, x int, offset float64) (value, variance float64, ok bool) {
	at := float64(x) + d.shift - offset
	i := int(math.Floor(at))
	signal := d.row.signal[d.element]
	if i < 1 || i+2 >= len(signal) {
		return 0, 0, false
	}
	for _, f := range d.row.own[i-1 : i+3] {
		if f != 0 {
			return 0, 0, false
		}
	}
	f := at - float64(i)
	a, b, c, e := float64(signal[i-1]), float64(signal[i]), float64(signal[i+1]), float64(signal[i+2])
	// Lagrange's polynomial through four pixels (Abramowitz & Stegun 25.2.13).
	value = -f*(f-1)*(f-2)/6*a + (f+1)*(f-1)*(f-2)/2*b - (f+1)*f*(f-2)/2*c + (f+1)*f*(f-1)/6*e
	if offset != 0 {
		value -= r.l.width() / 2 * ((1-f)*(a-2*b+c) + f*(b-2*c+e))
	}
	v := d.row.variance[min(d.element, len(d.row.variance)-1)]
	variance = (1-f)*float64(v[i]) + f*float64(v[i+1])
	return value, variance, value == value && variance > 0
}

// width is the variance of an element's mirrors along x, px^2.
func (l *stuckLight) width() float64 {
	n := float64(l.seq.ElementMirrors())
	return l.pitch() * l.pitch() * (n*n - 1) / 12
}

// measure finds how bright the light around is, and how much it scatters beyond its
// noise, averaged over some columns.
func (r *stuckRow) measure() {
	columns := len(r.l.trace)
	level, scatter := make([]float64, columns), make([]float64, columns)
	r.level, r.strength = level, make([]float64, columns)
	for x, shift := range r.l.trace {
		var n, sum, square, noise float64
		for i := range r.data {
			d := &r.data[i]
			mirrors := r.mirrors(d, shift)
			value, variance, ok := r.datum(d, x, 0)
			if !ok || mirrors < leastMirrors {
				continue
			}
			n++
			sum += value / mirrors
			square += value * value / (mirrors * mirrors)
			noise += variance / (mirrors * mirrors)
		}
		if n > 1 {
			level[x] = sum / n
			scatter[x] = (square - sum*sum/n - noise) / (n - 1)
		}
	}
	const reach = 2
	for x := range r.strength {
		first, last := max(0, x-reach), min(columns-1, x+reach)
		mean := 0.0
		for _, v := range scatter[first : last+1] {
			mean += v / float64(last-first+1)
		}
		// Data are means over some mirrors, which scatter more than they do.
		const smoothed = 1.5
		least := lightScatter * level[x]
		r.strength[x] = max(smoothed*mean, least*least)
	}
}

// leastMirrors' light is in a datum that tells what a mirror's is.
const leastMirrors = 0.25

// estimate gives what to add to each column, and to its variance. Where a pixel's light
// stands little out of its noise, its estimate is drawn to the level of the light around:
// too low on every star, and so along all of its spectrum. What weights for less noise
// make of the light, averaged over sharpReach columns, tells by how much.
func (r *stuckRow) estimate() (add, extra []float64) {
	columns := len(r.l.trace)
	add, extra = make([]float64, columns), make([]float64, columns)
	total := make([][]float64, columns) // weights of the data
	structure := make([]float64, columns)
	for k := range r.missing {
		m := &r.missing[k]
		lacks, low := make([]float64, columns), make([]float64, columns)
		weight := make([]float64, columns)
		for x, shift := range r.l.trace {
			if lacks[x] = r.lacks(m, shift); lacks[x] < leastLack {
				lacks[x] = 0
				continue
			}
			noise := r.noise(x)
			soft := r.weigh(x, k, noise)
			scale, sum := r.fit(soft, x, m.offset, shift, lacks[x])
			if scale == 0 { // no data: a level is all there is
				add[x] += r.level[x] * lacks[x]
				structure[x] += math.Sqrt(r.strength[x]+r.level[x]*r.level[x]) * lacks[x]
				continue
			}
			add[x] += sum
			structure[x] += math.Sqrt(r.strength[x] * soft.structure)
			if total[x] == nil {
				total[x] = make([]float64, len(r.data))
			}
			for i, c := range soft.c {
				total[x][i] += scale * c
			}
			if variance := r.variance(x); variance > 0 {
				if scale, sharp := r.fit(r.weigh(x, k, noise-sharpSteps), x, m.offset, shift, lacks[x]); scale != 0 {
					low[x], weight[x] = sharp-sum, 1/variance
				}
			}
		}
		addLow(add, low, lacks, weight)
	}
	for x := range extra {
		extra[x] = structure[x]*structure[x] + r.spread(total[x], x)
	}
	return add, extra
}

// Over sharpReach columns on either side noise falls to that of weights for noise of
// 4^-sharpSteps the variance.
const (
	sharpReach = 40
	sharpSteps = 3
)

// leastLack of a mirror's light, an element does not lack.
const leastLack = 1e-4

// addLow adds to each column what estimates around it are low by, in parts of what is
// lacking there.
func addLow(add, low, lacks, weight []float64) {
	for x := range add {
		if lacks[x] == 0 {
			continue
		}
		var top, bottom float64
		for near := max(0, x-sharpReach); near <= min(len(add)-1, x+sharpReach); near++ {
			top += weight[near] * lacks[near] * low[near]
			bottom += weight[near] * lacks[near] * lacks[near]
		}
		if bottom > 0 {
			add[x] += lacks[x] * top / bottom
		}
	}
}

// spread is what data of these weights add to the variance of a column, whose own light
// is one of them.
func (r *stuckRow) spread(weights []float64, x int) float64 {
	sum := 0.0
	for i, c := range weights {
		if _, variance, ok := r.datum(&r.data[i], x, 0); ok {
			sum += c * c * variance
			if r.data[i].own {
				sum += 2 * c * variance
			}
		}
	}
	return max(0, sum)
}

// variance is that of a column's own light; 0 where it is bad.
func (r *stuckRow) variance(x int) float64 {
	_, variance, ok := r.datum(&r.data[r.own], x, 0)
	if !ok {
		return 0
	}
	return variance
}

// noise is how a column's variance compares to the strength of its field, in powers of 4.
func (r *stuckRow) noise(x int) int {
	variance := r.variance(x)
	if !(variance > 0) || !(r.strength[x] > 0) {
		return 0
	}
	return min(max(int(math.Round(math.Log2(variance/r.strength[x])/2)), -8), 8)
}

// fit sums the data by their weights, scaled so that light which is the same everywhere
// comes out right whatever data are missing; 0 where too many are.
func (r *stuckRow) fit(w *lightWeights, x int, offset, shift, lacks float64) (scale, sum float64) {
	if w == nil {
		return 0, 0
	}
	seen := 0.0
	for i := range r.data {
		value, _, ok := r.datum(&r.data[i], x, offset)
		if !ok {
			continue
		}
		sum += w.c[i] * value
		seen += w.c[i] * r.mirrors(&r.data[i], shift)
	}
	if !(seen > lacks/2) {
		return 0, 0
	}
	return lacks / seen, sum * lacks / seen
}

// weigh gives the weights for the light of missing[k] at column x, for so much noise.
func (r *stuckRow) weigh(x, k, noise int) *lightWeights {
	key := weightKey{trace: int(math.Round(r.l.trace[x] / lightStep)), noise: noise, missing: k}
	w, ok := r.weights[key]
	if !ok {
		w = r.newWeights(key)
		r.weights[key] = w
	}
	return w
}

func (r *stuckRow) newWeights(key weightKey) *lightWeights {
	shift := float64(key.trace) * lightStep
	m, n, strips := &r.missing[key.missing], len(r.data), len(r.strips)
	mix := mat.NewDense(n, max(strips, 1), nil) // of the strips in the data
	problem := &calib.MissingLight{Target: make([]float64, n), Weight: make([]float64, n), Data: mat.NewSymDense(n, nil)}
	toMissing := make([]float64, strips)
	for s := range r.strips {
		strip := &r.strips[s]
		for i := range r.data {
			if d := &r.data[i]; d.element == strip.element {
				share := r.l.share(float64(d.y) - shift - strip.row)
				mix.Set(i, s, share)
				problem.Weight[i] += share * float64(len(strip.us))
			}
		}
		for _, u := range strip.us {
			for i, w := range m.ws {
				toMissing[s] += r.l.share(float64(r.y)-shift-m.rows[i]) * r.l.covariance(u-m.u, strip.w-w)
			}
		}
	}
	var half, all mat.Dense
	half.Mul(mix, r.within)
	all.Mul(&half, mix.T())
	for i := range n {
		for k := i; k < n; k++ {
			problem.Data.SetSym(i, k, all.At(i, k))
		}
		for s, v := range toMissing {
			problem.Target[i] += mix.At(i, s) * v
		}
	}
	for i, w := range m.ws {
		share := r.l.share(float64(r.y) - shift - m.rows[i])
		problem.TargetWeight += share
		for k, v := range m.ws {
			problem.TargetVariance += share * r.l.share(float64(r.y)-shift-m.rows[k]) * r.l.covariance(0, w-v)
		}
	}
	c, structure, ok := problem.Weights(math.Pow(4, float64(key.noise)))
	if !ok {
		return nil
	}
	return &lightWeights{c, structure}
}
