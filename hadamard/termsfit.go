package hadamard

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// TermFit is what was found of one term of a TermGram.
type TermFit struct {
	// E is the term's part in the correction of each row: readings become
	// y + E_0 * y + sum_m E_m * l_m. Its mean over the used rows is 0: what all frames have
	// in common belongs to the light.
	E, Err []float64
	// Posterior is the covariance of E's error.
	Posterior *mat.SymDense
	// Directions is how many independent patterns of E are measured.
	Directions float64
	// HeldOut has the chi-square without the term, and with it, as last tried.
	HeldOut HeldOut
	// Kept: the held-out chi-square falls. Else E, Err and Posterior are those of the
	// prior: nothing was found.
	Kept bool
}

// TermsFit is the throughput with the terms that the data ask for.
type TermsFit struct {
	// Throughput is the fit of the readings' own factor, together with the terms kept where
	// it is kept itself. Its HeldOut is that of the throughput alone, tried first.
	Throughput *ThroughputFit
	// Terms has an entry a term.
	Terms []TermFit
	// HeldOut is that of all that was kept.
	HeldOut HeldOut
}

// minTermDirections is how much of one pattern a term must measure to be kept: less is
// noise. A prior of one pattern, such as a slope proportional to airmass, has one at most.
const minTermDirections = 0.5

// ThroughputTerms is Throughput with terms: first the readings' factor alone, then each
// term in its order together with what was kept before, kept where the held-out chi-square
// falls (a term that is not, together with the factor if that was not kept before; and the
// factor again at the end, if it was not kept before); at last all that is kept, on all
// checks, where it stands above its error. priors[0] is the prior covariance of the throughput's E, priors[m]
// that of term m, v x v each; one of low rank ties rows together, as an extinction smooth
// in time does. Where found says so the factor is kept whatever this sample's hold-out
// says, a larger sample having told: a term alone would else take its place.
//
// Errors: as Throughput; another number of priors than of terms and one.
func (c *Checks) ThroughputTerms(g *TermGram, priors []*mat.SymDense, found bool) (*TermsFit, error) {
	if len(priors) != g.Terms()+1 {
		return nil, fmt.Errorf("throughput: %d priors for %d terms; one is needed for the throughput and one for each term", len(priors), g.Terms())
	}
	for _, p := range priors {
		if err := c.checkFit(g.Gram, p); err != nil {
			return nil, err
		}
	}
	first, err := c.Throughput(g.Gram, priors[0])
	if err != nil {
		return nil, err
	}
	s := termSearch{c, g, priors, make([]bool, len(priors)), &TermsFit{Throughput: first, Terms: make([]TermFit, g.Terms()), HeldOut: first.HeldOut}}
	if s.kept[0] = first.Kept || found; !s.kept[0] { // terms must beat no correction, not a bad one
		s.out.HeldOut.After, s.out.HeldOut.ExpectedAfter = first.HeldOut.Before, first.HeldOut.ExpectedBefore
	}
	for m := 1; m <= g.Terms(); m++ {
		if s.out.Terms[m-1].HeldOut, s.out.Terms[m-1].Directions, err = s.try(m); err != nil {
			return nil, err
		}
		if !s.kept[m] && !s.kept[0] { // each may hide the other
			if s.out.Terms[m-1].HeldOut, s.out.Terms[m-1].Directions, err = s.try(0, m); err != nil {
				return nil, err
			}
		}
	}
	if !s.kept[0] && slices.Contains(s.kept, true) {
		if _, _, err := s.try(0); err != nil {
			return nil, err
		}
	}
	return s.out, s.finish()
}

// termSearch decides which of the terms, the throughput being 0, to keep.
type termSearch struct {
	checks *Checks
	gram   *TermGram
	priors []*mat.SymDense
	kept   []bool
	out    *TermsFit
}

// try fits what is kept and more terms on all parts but one, judges them on that and keeps
// them or not, by the last one's directions.
func (s *termSearch) try(more ...int) (HeldOut, float64, error) {
	m := more[len(more)-1]
	for _, m := range more {
		s.kept[m] = true
	}
	terms := s.terms()
	sums := s.gram.sums(terms)
	held, directions := HeldOut{Before: s.out.HeldOut.After, ExpectedBefore: s.out.HeldOut.ExpectedAfter}, 0.0
	splits := s.checks.splits()
	for _, part := range splits {
		fit, found, err := part.fit.fitTerms(sums, s.activePriors(), terms)
		if err != nil {
			return held, 0, err
		}
		e := [][]float64{fit.E}
		for _, t := range found[1:] {
			e = append(e, t.E)
		}
		found[0].Directions = fit.Directions
		directions += found[slices.Index(terms, m)].Directions / float64(len(splits))
		x, expected, sd := part.judge.Chi2(sums.corrected(e))
		held.After, held.ExpectedAfter, held.SD = held.After+x, held.ExpectedAfter+expected, math.Hypot(held.SD, sd)
	}
	kept := held.Falls() && directions >= minTermDirections
	for _, m := range more {
		s.kept[m] = kept
	}
	if kept {
		before := s.out.HeldOut
		s.out.HeldOut = held
		s.out.HeldOut.Before, s.out.HeldOut.ExpectedBefore = before.Before, before.ExpectedBefore
	}
	return held, directions, nil
}

// terms are the readings and the terms kept.
func (s *termSearch) terms() []int {
	terms := []int{0}
	for m := 1; m < len(s.kept); m++ {
		if s.kept[m] {
			terms = append(terms, m)
		}
	}
	return terms
}

// activePriors has a zero for the throughput where it is not kept, which leaves it out.
func (s *termSearch) activePriors() []*mat.SymDense {
	if s.kept[0] {
		return s.priors
	}
	active := slices.Clone(s.priors)
	active[0] = mat.NewSymDense(s.checks.code.v, nil)
	return active
}

// leastSignificance is how many times its error a term must be, both rms over the rows. A
// scene whose light in the term is almost that of the factor (sky lines on a smooth sky)
// tells the two only together: the held-out chi-square falls by what a second factor
// absorbs of the first one's error, and the throughput would be given away for it. Noise
// alone makes a term of less than 1 of its errors, 1.5 being several standard deviations of
// that over tens of rows.
const leastSignificance = 1.5

// fitKept fits all that was kept on all checks, without terms that do not stand above
// their errors.
func (s *termSearch) fitKept() (fit *ThroughputFit, found []TermFit, err error) {
	used := s.checks.usedRows()
	for {
		terms := s.terms()
		fit, found, err = s.checks.fitTerms(s.gram.sums(terms), s.activePriors(), terms)
		if err != nil {
			return nil, nil, err
		}
		dropped := false
		for a, m := range terms[1:] {
			f := &found[a+1]
			square := 0.0
			for _, k := range used {
				square += f.E[k] * f.E[k] / float64(len(used))
			}
			if math.Sqrt(square) < leastSignificance*rmsError(f.Posterior, used) {
				s.kept[m], dropped = false, true
			}
		}
		if !dropped {
			return fit, found, nil
		}
	}
}

// finish takes the fit of what was kept.
func (s *termSearch) finish() error {
	fit, found, err := s.fitKept()
	if err != nil {
		return err
	}
	used, terms := s.checks.usedRows(), s.terms()
	if s.kept[0] {
		fit.HeldOut, fit.Kept = s.out.Throughput.HeldOut, true
		s.out.Throughput = fit
	}
	for m := range s.out.Terms {
		t := &s.out.Terms[m]
		t.Kept = s.kept[m+1]
		t.E, t.Posterior = make([]float64, s.checks.code.v), centred(s.priors[m+1], used)
		if t.Kept {
			f := found[slices.Index(terms, m+1)]
			t.E, t.Posterior, t.Directions = f.E, f.Posterior, f.Directions
		}
		t.Err = make([]float64, s.checks.code.v)
		for k := range t.Err {
			t.Err[k] = math.Sqrt(t.Posterior.At(k, k))
		}
	}
	return nil
}

// fitTerms fits some terms together; found[0] is the throughput's entry, empty.
func (c *Checks) fitTerms(sums *lightSums, priors []*mat.SymDense, terms []int) (*ThroughputFit, []TermFit, error) {
	v, used := c.code.v, c.usedRows()
	prior := mat.NewSymDense(v*len(terms), nil)
	for a, m := range terms {
		for i := range v {
			for j := i; j < v; j++ {
				prior.SetSym(a*v+i, a*v+j, priors[m].At(i, j))
			}
		}
	}
	found, err := estimate(c.equations(sums), prior)
	if err != nil {
		return nil, nil, fmt.Errorf("throughput with %d terms: %w", len(terms)-1, err)
	}
	block := func(a int) *mat.SymDense {
		return symmetric(mat.DenseCopyOf(found.posterior.SliceSym(a*v, a*v+v)))
	}
	raw := append([]float64(nil), found.e[:v]...)
	fit := newThroughputFit(raw, block(0), priors[0], found.directions[0], used)
	scale := (1 + fit.E[0]) / (1 + max(found.e[0], minFactor)) // of the normalisation
	list := make([]TermFit, len(terms))
	for a := 1; a < len(terms); a++ {
		e, mean := append([]float64(nil), found.e[a*v:a*v+v]...), 0.0
		for _, k := range used {
			mean += e[k] / float64(len(used))
		}
		for k := range e {
			e[k] = scale * (e[k] - mean)
		}
		list[a] = TermFit{E: e, Posterior: centred(block(a), used), Directions: found.directions[a]}
	}
	return fit, list, nil
}

// centred is the covariance of numbers less their mean over some rows.
func centred(s *mat.SymDense, rows []int) *mat.SymDense {
	m := identity(s.SymmetricDim())
	for i := range s.SymmetricDim() {
		for _, j := range rows {
			m.Set(i, j, m.At(i, j)-1/float64(len(rows)))
		}
	}
	return congruent(m, s)
}

// Correct makes the readings of a block of pixels what they are by the fit: dst = y +
// E_0 * y + sum_m E_m * l_m over what is kept, with l_m from light, readings as free of the
// faults as is known (y itself, or what an earlier fit made of it). weights are those of
// TermGram.Add; dst may be y, not light. Sizes as there.
func (f *TermsFit) Correct(dst, y, light []float32, weights [][]float32, t *TermGram, pixels, stride int) {
	t.check("Correct", weights, pixels, stride, len(dst), len(y), len(light))
	b := newTermBlock(t.V(), t.Terms())
	for p := 0; p < pixels; p += gramPixels {
		n := min(gramPixels, pixels-p)
		f.correctBlock(dst[p:], y[p:], light[p:], weights, t, b, p, n, stride)
	}
}

func (f *TermsFit) correctBlock(dst, y, light []float32, weights [][]float32, t *TermGram, b *termBlock, first, n, stride int) {
	for k := range t.V() {
		by := float32(1)
		if f.Throughput.Kept {
			by = float32(1 + f.Throughput.E[k])
		}
		for p, x := range y[k*stride : k*stride+n] {
			b.clean[k*n+p] = light[k*stride+p]
			dst[k*stride+p] = x * by
		}
	}
	t.decoder.Decode(b.decoded, b.clean, n, n)
	for m, term := range f.Terms {
		if !term.Kept {
			continue
		}
		t.termLight(b, m+1, weights[m][first:], n, stride)
		for k := range t.V() {
			e := float32(term.E[k])
			for p, x := range b.out[k*n : (k+1)*n] {
				dst[k*stride+p] += float32(e * x)
			}
		}
	}
}
