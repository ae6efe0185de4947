package reduce

import "math"

// measure finds how bright the light around is, and how much it scatters beyond its
// noise, averaged over some columns.
func (r *stuckRow) measure() {
	columns := len(r.l.trace)
	scatter := make([]float64, columns)
	r.level, r.strength = make([]float64, columns), make([]float64, columns)
	for x := range columns {
		var n, sum, square, noise float64
		for _, d := range r.column(x) {
			if !d.ok || d.mirrors < leastMirrors {
				continue
			}
			value := d.value / d.mirrors
			n++
			sum += value
			square += value * value
			noise += d.variance / (d.mirrors * d.mirrors)
		}
		if n > 1 {
			r.level[x] = sum / n
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
		least := lightScatter * r.level[x]
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
	e := &lightEstimate{
		add: make([]float64, columns), structure: make([]float64, columns), total: make([][]float64, columns),
		low: make([]float64, columns), lacks: make([]float64, columns), weight: make([]float64, columns),
	}
	for k := range r.missing {
		clear(e.low)
		clear(e.weight)
		for x := range columns {
			if e.lacks[x] = r.lacks(k, r.l.trace[x]); e.lacks[x] < leastLack {
				e.lacks[x] = 0
				continue
			}
			r.estimateColumn(e, x, k)
		}
		e.addLow()
	}
	extra = make([]float64, columns)
	for x := range extra {
		extra[x] = e.structure[x]*e.structure[x] + r.spread(e.total[x], x)
	}
	return e.add, extra
}

// lightEstimate is what is put in, by column: add, the rms of the light's structure that
// it misses, the weights of the data in it. low is what the estimates of one missing u
// are too low by, with their weights, lacks how much of a mirror's light is missing.
type lightEstimate struct {
	add, structure     []float64
	total              [][]float64
	low, lacks, weight []float64
}

// Over sharpReach columns on either side noise falls to that of weights for noise of
// 4^-sharpSteps the variance.
const (
	sharpReach = 40
	sharpSteps = 3
)

// leastLack of a mirror's light, an element does not lack.
const leastLack = 1e-4

func (r *stuckRow) estimateColumn(e *lightEstimate, x, k int) {
	noise, variance := r.noise(x)
	soft := r.weigh(x, k, noise)
	values := r.valuesAt(x, r.missing[k].offset)
	scale, sum := r.fit(soft, x, values, e.lacks[x])
	if scale == 0 { // no data: a level is all there is
		e.add[x] += r.level[x] * e.lacks[x]
		e.structure[x] += math.Sqrt(r.strength[x]+r.level[x]*r.level[x]) * e.lacks[x]
		return
	}
	e.add[x] += sum
	e.structure[x] += math.Sqrt(r.strength[x] * soft.structure)
	if e.total[x] == nil {
		e.total[x] = make([]float64, len(r.data))
	}
	for i, c := range soft.c {
		e.total[x][i] += scale * c
	}
	if variance > 0 {
		if scale, sharp := r.fit(r.weigh(x, k, noise-sharpSteps), x, values, e.lacks[x]); scale != 0 {
			e.low[x], e.weight[x] = sharp-sum, 1/variance
		}
	}
}

// addLow adds to each column what estimates around it are low by, in parts of what is
// lacking there.
func (e *lightEstimate) addLow() {
	for x := range e.add {
		if e.lacks[x] == 0 {
			continue
		}
		var top, bottom float64
		for near := max(0, x-sharpReach); near <= min(len(e.add)-1, x+sharpReach); near++ {
			part := e.weight[near] * e.lacks[near]
			top += part * e.low[near]
			bottom += part * e.lacks[near]
		}
		if bottom > 0 {
			e.add[x] += e.lacks[x] * top / bottom
		}
	}
}

// fit sums the data's values by their weights, scaled so that light which is the same
// everywhere comes out right whatever data are missing; 0 where too many are.
func (r *stuckRow) fit(w *lightWeights, x int, values []float64, lacks float64) (scale, sum float64) {
	if w == nil {
		return 0, 0
	}
	seen := 0.0
	for i, d := range r.column(x) {
		if v := values[i]; v == v {
			sum += w.c[i] * v
			seen += w.c[i] * d.mirrors
		}
	}
	if !(seen > lacks/2) {
		return 0, 0
	}
	return lacks / seen, sum * lacks / seen
}

// spread is what data of these weights add to the variance of a column, whose own light
// is one of them.
func (r *stuckRow) spread(weights []float64, x int) float64 {
	sum := 0.0
	column := r.column(x)
	for i, c := range weights {
		if d := column[i]; d.ok {
			sum += c * c * d.variance
			if i == r.own {
				sum += 2 * c * d.variance
			}
		}
	}
	return max(0, sum)
}

// noise is how a column's variance compares to the strength of its field, in powers of 4,
// and that variance, 0 where the pixel is bad.
func (r *stuckRow) noise(x int) (power int, variance float64) {
	const most = 8
	own := r.column(x)[r.own]
	if !own.ok || !(r.strength[x] > 0) {
		return 0, 0
	}
	power = int(math.Round(math.Log2(own.variance/r.strength[x]) / 2))
	return min(max(power, -most), most), own.variance
}
