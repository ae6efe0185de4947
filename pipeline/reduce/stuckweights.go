package reduce

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/calib"
)

// lightWeights are those of the data in an estimate of missing light.
type lightWeights struct {
	c         []float64
	structure float64
}

// geometryAt is how data and what is missing are related where the trace is shifted by so
// many lightStep, and the weights that follow from it.
type geometryAt struct {
	shift   int
	problem []*calib.MissingLight // by what is missing
	weights map[weightKey]*lightWeights
}

type weightKey struct{ missing, noise int }

// relate computes the covariances of strips of mirrors: sums over their mirrors.
func (r *stuckRow) relate() {
	n := len(r.strips)
	r.within = make([]float64, n*n)
	across, along := r.l.correlations(r.l.elements[r.last].Last-r.l.elements[r.first].First), r.l.correlations(r.to-r.from)
	for a := range r.strips {
		for b := range a + 1 {
			s, t := &r.strips[a], &r.strips[b]
			sum := 0.0
			for _, u := range s.us {
				for _, v := range t.us {
					sum += across[max(u-v, v-u)]
				}
			}
			sum *= along[max(s.w-t.w, t.w-s.w)]
			r.within[a*n+b], r.within[b*n+a] = sum, sum
		}
	}
}

// correlations of the light of mirrors 0, 1 ... n apart.
func (l *stuckLight) correlations(n int) []float64 {
	list := make([]float64, n+1)
	for i := range list {
		list[i] = l.correlation(i, 0)
	}
	return list
}

func (l *stuckLight) correlation(du, dw int) float64 {
	return math.Exp(-float64(du*du+dw*dw) / (2 * l.length * l.length))
}

// weigh gives the weights for the light of missing[k] at column x, for so much noise; nil
// where there are none.
func (r *stuckRow) weigh(x, k, noise int) *lightWeights {
	shift := int(math.Round(r.l.trace[x] / lightStep))
	var g *geometryAt
	for i := range r.geometries {
		if r.geometries[i].shift == shift {
			g = &r.geometries[i]
		}
	}
	if g == nil {
		r.geometries = append(r.geometries, r.newGeometry(shift))
		g = &r.geometries[len(r.geometries)-1]
	}
	key := weightKey{k, noise}
	w, ok := g.weights[key]
	if !ok {
		if c, structure, fixed := g.problem[k].Weights(math.Pow(4, float64(noise))); fixed {
			w = &lightWeights{c, structure}
		}
		g.weights[key] = w
	}
	return w
}

func (r *stuckRow) newGeometry(step int) geometryAt {
	shift := float64(step) * lightStep
	n, strips := len(r.data), len(r.strips)
	weight := make([]float64, n)
	toStrips := make([]float64, n*strips) // covariances of data and strips
	for i := range r.data {
		d := &r.data[i]
		from, to := r.reached(d, shift)
		for w := from; w <= to; w++ {
			at := r.strip(d.element, w)
			share := r.l.share(float64(d.y) - shift - r.strips[at].row)
			weight[i] += share * float64(len(r.strips[at].us))
			for s, v := range r.within[at*strips : (at+1)*strips] {
				toStrips[i*strips+s] += share * v
			}
		}
	}
	data := mat.NewSymDense(n, nil)
	for k := range r.data {
		d := &r.data[k]
		from, to := r.reached(d, shift)
		for w := from; w <= to; w++ {
			at := r.strip(d.element, w)
			share := r.l.share(float64(d.y) - shift - r.strips[at].row)
			for i := range k + 1 {
				data.SetSym(i, k, data.At(i, k)+share*toStrips[i*strips+at])
			}
		}
	}
	g := geometryAt{shift: step, weights: map[weightKey]*lightWeights{}}
	for k := range r.missing {
		p := &calib.MissingLight{Data: data, Weight: weight}
		r.target(p, &r.missing[k], shift)
		g.problem = append(g.problem, p)
	}
	return g
}

// target relates the missing light to the data.
func (r *stuckRow) target(p *calib.MissingLight, m *missingLight, shift float64) {
	toMissing := make([]float64, len(r.strips))
	for i, w := range m.ws {
		share := r.l.share(float64(r.y) - shift - m.rows[i])
		p.TargetWeight += share
		for k, v := range m.ws {
			p.TargetVariance += share * r.l.share(float64(r.y)-shift-m.rows[k]) * r.l.correlation(0, w-v)
		}
		for s := range r.strips {
			for _, u := range r.strips[s].us {
				toMissing[s] += share * r.l.correlation(u-m.u, r.strips[s].w-w)
			}
		}
	}
	p.Target = make([]float64, len(r.data))
	for i := range r.data {
		d := &r.data[i]
		from, to := r.reached(d, shift)
		for w := from; w <= to; w++ {
			at := r.strip(d.element, w)
			p.Target[i] += r.l.share(float64(d.y)-shift-r.strips[at].row) * toMissing[at]
		}
	}
}
