package hadamard

import (
	"math"
	"slices"
)

// PursuitRule says when a sample counts as struck.
type PursuitRule struct {
	// Sigmas is the charge of a struck sample, in standard errors of the charge that
	// the checks measure, from which it is found. A sample that was not struck exceeds
	// it with the upper tail of the normal law.
	Sigmas float64
	// HintSigmas is the same for a row that is hinted at: one that struck samples
	// nearby share.
	HintSigmas float64
	// MarginSigmas: a row is told from another if its charge is significant by so many
	// standard errors more than the other's would be in its place.
	MarginSigmas float64
	// MostHits bounds the struck samples of a pixel.
	MostHits int
}

// DefaultPursuitRule finds what stands out by 5.5 standard errors: 2 of 1e8 samples
// do by chance. A hinted row is one of few: 4.2, or 1 of 75 000 hinted ones. At most a
// quarter of the checks are spent on hits.
func DefaultPursuitRule(checks int) PursuitRule {
	return PursuitRule{Sigmas: 5.5, HintSigmas: 4.2, MarginSigmas: 1.5, MostHits: checks / 4}
}

// Hit is a struck sample: the code row, the charge that the checks find in it, in the
// readings' unit, and its significance in standard errors.
type Hit struct {
	Row          int
	Charge       float64
	Significance float64
	// Hinted is a hit that only the lower threshold of a hinted row let through, or
	// that was preferred to another for the hint.
	Hinted bool
}

// Pursuit finds the struck samples of single pixels in their checks. It never changes
// and is safe for concurrent use, each goroutine with a PursuitWork of its own.
//
// A struck sample of row k and charge h adds h times column k of the checks' basis to
// a pixel's checks, which are white noise otherwise: a sparse problem, solved greedily
// by orthogonal least squares (Chen, Billings and Luo 1989, Int. J. Control 50, 1873:
// matching pursuit, Pati et al. 1993, that measures each candidate on what the rows
// taken before leave of it), all charges being fitted together. Then each row is put
// to the test again with the others held: where another row fits better it takes its
// place, and where another fits nearly as well the pixel is ambiguous.
type Pursuit struct {
	rule  PursuitRule
	v, g  int
	atoms []float64 // [row][check], of length 1 or zero
	norm  []float64 // length of the basis's column; 0 for a lost row
}

// NewPursuit makes the pursuit over the checks of c.
func NewPursuit(c *Checks, rule PursuitRule) *Pursuit {
	p := &Pursuit{rule: rule, v: c.code.v, g: c.G()}
	p.atoms, p.norm = make([]float64, p.v*p.g), make([]float64, p.v)
	basis := c.Basis()
	for k := range p.v {
		atom := p.atom(k)
		for i := range atom {
			atom[i] = basis.At(i, k)
		}
		p.norm[k] = math.Sqrt(dot(atom, atom))
		if p.norm[k] < negligible {
			p.norm[k] = 0
			clear(atom)
			continue
		}
		for i := range atom {
			atom[i] /= p.norm[k]
		}
	}
	return p
}

func (p *Pursuit) atom(k int) []float64 { return p.atoms[k*p.g : (k+1)*p.g] }

// PursuitWork is the memory of one goroutine's searches.
type PursuitWork struct {
	// Hits is what the last search found, by row.
	Hits []Hit
	// Covariance is that of the hits' charges, [hit][hit].
	Covariance []float64
	// Ambiguous tells that for some hit another row does nearly as well.
	Ambiguous bool
	// Left is the mean square of what the hits leave of the checks, in the noise's
	// variance: about 1 when all is explained.
	Left float64

	rest, left []float64
	q          [][]float64 // orthonormal basis of the chosen atoms
	chosen     []int
	solution   []float64
	triangle   [][]float64 // atoms in terms of q
	inverse    []float64   // of triangle
}

// NewWork makes the memory for searches of p.
func (p *Pursuit) NewWork() *PursuitWork {
	n := p.rule.MostHits + 1
	w := &PursuitWork{
		rest: make([]float64, p.g), left: make([]float64, p.v), inverse: make([]float64, n*n),
		solution: make([]float64, n), Covariance: make([]float64, 0, n*n), Hits: make([]Hit, 0, n), chosen: make([]int, 0, n),
	}
	for range n {
		w.q = append(w.q, make([]float64, p.g))
		w.triangle = append(w.triangle, make([]float64, n))
	}
	return w
}

// Find looks for struck samples of one pixel. checks is Basis y (G values), s2 the
// variance of one of its readings, the mean over the rows, and light how much of s2
// one unit of charge in one reading accounts for, its photon noise over v, which is
// taken out again. hinted, which may be nil, tells the rows in which pixels nearby
// were struck. The result is in w, valid until the next call.
func (p *Pursuit) Find(w *PursuitWork, checks []float64, s2, light float64, hinted func(row int) bool) {
	w.chosen, w.Hits, w.Covariance, w.Ambiguous = w.chosen[:0], w.Hits[:0], w.Covariance[:0], false
	s := math.Sqrt(s2)
	for len(w.chosen) < p.rule.MostHits {
		p.project(w, checks, -1)
		k, score, _, _ := p.best(w, s, hinted)
		if k < 0 || score < p.threshold(k, hinted) {
			break
		}
		w.chosen = append(w.chosen, k)
		p.fit(w, checks)
		s = math.Sqrt(max(s2-light*p.charges(w), s2/4))
	}
	if len(w.chosen) == 0 {
		w.Left = dot(checks, checks) / (float64(p.g) * s2)
		return
	}
	p.refine(w, checks, s, hinted)
	p.finish(w, checks, s2, light, hinted)
}

func (p *Pursuit) threshold(k int, hinted func(int) bool) float64 {
	if hinted != nil && hinted(k) {
		return p.rule.HintSigmas
	}
	return p.rule.Sigmas
}

// project sets rest to what the chosen atoms but number leave of the checks, and
// left to what they leave of each atom's square.
func (p *Pursuit) project(w *PursuitWork, checks []float64, number int) {
	copy(w.rest, checks)
	for k := range w.left {
		w.left[k] = 1
	}
	n := 0
	for i, k := range w.chosen {
		if i == number {
			continue
		}
		q := w.q[n]
		copy(q, p.atom(k))
		for m := range n {
			subtract(q, w.q[m], dot(q, w.q[m]))
		}
		length := math.Sqrt(dot(q, q))
		if length < dependent {
			continue
		}
		for c := range q {
			q[c] /= length
		}
		subtract(w.rest, q, dot(w.rest, q))
		for j := range w.left {
			d := dot(q, p.atom(j))
			w.left[j] -= d * d
		}
		n++
	}
}

// dependent: an atom of which the others leave less than this length cannot be told
// from them.
const dependent = 0.05

// best gives the row whose charge is most significant, and the next, with their
// significances; -1 where there is none.
func (p *Pursuit) best(w *PursuitWork, s float64, hinted func(int) bool) (k int, score float64, next int, nextScore float64) {
	k, next = -1, -1
	for j := range p.v {
		if p.norm[j] == 0 || w.left[j] < dependent*dependent {
			continue
		}
		z := dot(w.rest, p.atom(j)) / (s * math.Sqrt(w.left[j]))
		// A row that neighbours share is believed before one that they do not.
		if hinted != nil && z > p.rule.HintSigmas && hinted(j) {
			z += p.rule.MarginSigmas
		}
		switch {
		case k < 0 || z > score:
			k, score, next, nextScore = j, z, k, score
		case next < 0 || z > nextScore:
			next, nextScore = j, z
		}
	}
	return k, score, next, nextScore
}

// refinements bounds how often rows change places.
const refinements = 4

// refine tests each row with the others held, replaces it by a better one, and drops
// what is not significant any more.
func (p *Pursuit) refine(w *PursuitWork, checks []float64, s float64, hinted func(int) bool) {
	for range refinements {
		changed := false
		w.Ambiguous = false
		for i := 0; i < len(w.chosen); i++ {
			p.project(w, checks, i)
			k, score, next, nextScore := p.best(w, s, hinted)
			switch {
			case k < 0 || score < p.threshold(k, hinted):
				w.chosen = slices.Delete(w.chosen, i, i+1)
				i--
				changed = true
				continue
			case k != w.chosen[i] && !slices.Contains(w.chosen, k):
				w.chosen[i] = k
				changed = true
			}
			if next >= 0 && nextScore > score-p.rule.MarginSigmas {
				w.Ambiguous = true
			}
		}
		if !changed {
			return
		}
	}
	w.Ambiguous = true // it does not come to rest
}

// fit solves for the charges of the chosen rows, in units of their atoms.
func (p *Pursuit) fit(w *PursuitWork, checks []float64) {
	n := len(w.chosen)
	for i, k := range w.chosen {
		q := w.q[i]
		copy(q, p.atom(k))
		for m := range i {
			d := dot(q, w.q[m])
			w.triangle[m][i] = d
			subtract(q, w.q[m], d)
		}
		length := math.Sqrt(dot(q, q))
		w.triangle[i][i] = length
		for c := range q {
			q[c] /= length
		}
		w.solution[i] = dot(q, checks)
	}
	for i := n - 1; i >= 0; i-- {
		for m := i + 1; m < n; m++ {
			w.solution[i] -= w.triangle[i][m] * w.solution[m]
		}
		w.solution[i] /= w.triangle[i][i]
	}
}

// charges is the sum of the fitted charges.
func (p *Pursuit) charges(w *PursuitWork) float64 {
	sum := 0.0
	for i, k := range w.chosen {
		sum += w.solution[i] / p.norm[k]
	}
	return sum
}

// finish fills in the result.
func (p *Pursuit) finish(w *PursuitWork, checks []float64, s2, light float64, hinted func(int) bool) {
	slices.Sort(w.chosen)
	p.fit(w, checks)
	noise := max(s2-light*p.charges(w), s2/4)
	n := len(w.chosen)
	w.Covariance = w.Covariance[:n*n]
	p.covariance(w, noise)
	copy(w.rest, checks)
	for i, k := range w.chosen {
		subtract(w.rest, p.atom(k), w.solution[i])
		h := Hit{Row: k, Charge: w.solution[i] / p.norm[k]}
		h.Significance = h.Charge / math.Sqrt(w.Covariance[i*n+i])
		h.Hinted = hinted != nil && hinted(k)
		w.Hits = append(w.Hits, h)
	}
	if p.g > n {
		w.Left = dot(w.rest, w.rest) / (float64(p.g-n) * noise)
	}
}

// covariance is noise times the inverse of the Gram matrix of the chosen columns, by
// the triangle of fit.
func (p *Pursuit) covariance(w *PursuitWork, noise float64) {
	n := len(w.chosen)
	inverse := w.inverse[:n*n]
	clear(inverse)
	for m := range n {
		for i := m; i >= 0; i-- {
			x := 0.0
			if i == m {
				x = 1
			}
			for c := i + 1; c <= m; c++ {
				x -= w.triangle[i][c] * inverse[c*n+m]
			}
			inverse[i*n+m] = x / w.triangle[i][i]
		}
	}
	for a := range n {
		for b := range n {
			sum := 0.0
			for m := max(a, b); m < n; m++ {
				sum += inverse[a*n+m] * inverse[b*n+m]
			}
			w.Covariance[a*n+b] = noise * sum / (p.norm[w.chosen[a]] * p.norm[w.chosen[b]])
		}
	}
}

func dot(a, b []float64) float64 {
	b = b[:len(a)]
	sum := 0.0
	for i, x := range a {
		sum += float64(x * b[i])
	}
	return sum
}

// subtract takes factor times b from a.
func subtract(a, b []float64, factor float64) {
	b = b[:len(a)]
	for i := range a {
		a[i] -= float64(factor * b[i])
	}
}
