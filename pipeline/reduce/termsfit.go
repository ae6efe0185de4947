package reduce

import (
	"context"
	"fmt"
	"math"

	"go.uber.org/zap"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

const (
	// priorSlope and priorLines are the rms by which a frame's terms are taken to vary.
	priorSlope = 0.05
	priorLines = 0.10
	// termSigmas is by how many of its standard deviations the held-out chi-square must
	// stand above what noise gives, after the throughput alone, for terms to be looked
	// for.
	termSigmas = 5
	// termSampleWork bounds v^2 x pixels of their sample, for a few seconds where they are
	// looked for; its error is that of a reading over the root of pixels x g/v, and with a
	// fifth of it the halves of 16 dark columns do not tell a slope of 10 % on the demo.
	termSampleWork = 250_000_000
	leastTermPixel = 512
	// mostTermRows bounds the code's size: the fit solves for three times as many
	// unknowns.
	mostTermRows = 255
	// termBytes a reading are held: readings, variances, light twice, decode and weights.
	termBytes  = 4 * (5 + termCount)
	termPasses = 2
)

// troubled tells whether the dark columns stand away from zero after what was done.
func (r *darkResult) troubled() bool {
	left, expected := r.heldOut.Before, r.heldOut.ExpectedBefore
	if r.kept {
		left, expected = r.heldOut.After, r.heldOut.ExpectedAfter
	}
	return left-expected > termSigmas*r.heldOut.SD
}

// measureTerms looks for terms where the throughput alone does not explain the dark
// columns; if there are some, it measures the throughput again without them. before is
// what was believed before the dark columns were asked.
func (r *reduction) measureTerms(ctx context.Context, t *throughput, before *belief) error {
	v := r.seq.V
	if !t.found.troubled() || v > mostTermRows {
		return nil
	}
	code, err := r.code()
	if err != nil {
		return err
	}
	pixels := min(samplePixels, r.camera.Columns*r.camera.Rows, max(leastTermPixel, termSampleWork/(v*v*len(t.dark.cycles))))
	unknowns := int64(1+termCount) * int64(v)
	samples := int64(v) * int64(pixels) * int64(len(t.dark.cycles))
	if need := fitMatrices*8*unknowns*unknowns + termBytes*samples + runtimeBytes; need > r.opts.MemoryBytes {
		return fmt.Errorf("--memory of %d MiB is too little to look for what varies apart from the throughput of %d code rows; give at least %d MiB, or say `throughput: {use: off}` in the recipe", r.opts.MemoryBytes>>20, v, need>>20+1)
	}
	f := &termsFit{reduction: r, through: t, terms: r.newTerms(code), before: before, joint: &darkResult{belief: before.clone(), kept: true}}
	if err := r.codedSampler(r.correction.offset, pixels).each(ctx, f.add); err != nil {
		return err
	}
	if err := f.fit(); err != nil || !f.terms.corrects() {
		return err
	}
	r.correction.terms = f.terms
	return r.takeTerms(ctx, f)
}

// termsFit fits the terms of all cycles on a sample of its own.
type termsFit struct {
	reduction *reduction
	through   *throughput
	terms     *terms
	before    *belief
	places    []float64
	blocks    []cycleBlock // by cycle, of all pixels
	heldOut   [termCount]hadamard.HeldOut
	kept      [termCount]bool
	// joint is the throughput fitted together with the terms, kept where all cycles'
	// are.
	joint *darkResult
}

// add takes a chunk of the sample: scaled by the throughput believed before, struck pixels
// dropped.
func (f *termsFit) add(s *sample) error {
	d := f.through.dark
	n := len(s.pixels)
	if n == 0 {
		return nil
	}
	if f.blocks == nil {
		f.blocks = make([]cycleBlock, len(d.cycles))
	}
	for _, at := range s.pixels {
		f.places = append(f.places, f.terms.place(at.x, at.y))
	}
	for i, c := range d.cycles {
		b := new(cycleBlock)
		b.y, b.s2 = s.block(c, d.excess)
		if d.neighbour != nil {
			d.neighbour(b.y, s.pixels, n, c.lost())
		}
		if basis := d.sums[i].checks.Basis(); basis != nil {
			dropStruck(b.y, b.s2, n, n, basis)
		}
		factor, _ := f.before.ofCycle(c)
		for k, by := range factor {
			for p := k * n; p < (k+1)*n; p++ {
				b.y[p] *= float32(by)
				b.s2[p] *= float32(by * by)
			}
		}
		f.blocks[i].y, f.blocks[i].s2 = joined(f.blocks[i].y, b.y, d.checks.Code().V()), joined(f.blocks[i].s2, b.s2, d.checks.Code().V())
	}
	return nil
}

// joined puts the pixels of two blocks of so many rows side by side.
func joined(a, b []float32, rows int) []float32 {
	na, nb := len(a)/rows, len(b)/rows
	out := make([]float32, 0, len(a)+len(b))
	for k := range rows {
		out = append(append(out, a[k*na:(k+1)*na]...), b[k*nb:(k+1)*nb]...)
	}
	return out
}

// fit finds the sky's lines and fits each cycle.
func (f *termsFit) fit() error {
	d, n := f.through.dark, len(f.places)
	if n == 0 {
		return nil
	}
	v := d.checks.Code().V()
	lights := make([][]float32, len(d.cycles))
	sky := newSkyLines(f.terms.tables[termSlope])
	decoded := make([]float32, v*n)
	for i := range d.cycles {
		lights[i] = f.firstLight(i)
		if err := f.decode(decoded, lights[i], i); err != nil {
			return err
		}
		sky.add(f.terms, decoded, f.places, n)
	}
	f.terms.tables[termLines] = sky.lines()
	for i := range d.cycles {
		if err := f.fitCycle(i, lights[i], decoded); err != nil {
			return err
		}
	}
	for m := range f.kept {
		if f.terms.tables[m] != nil {
			f.through.addHeldOut(termNames[m], f.heldOut[m], f.kept[m])
		}
	}
	f.reduction.log.Info("terms", zap.Int("pixels", n), zap.Bools("kept", f.kept[:]), zap.Bool("lines", f.terms.tables[termLines] != nil))
	return nil
}

// firstLight are the readings of cycle i as free of drift as the throughput alone makes
// them.
func (f *termsFit) firstLight(i int) []float32 {
	n := len(f.places)
	light := append([]float32(nil), f.blocks[i].y...)
	if !f.through.found.kept {
		return light
	}
	for row, k := range f.through.dark.cycles[i].frame {
		if k < 0 {
			continue
		}
		by := float32((1 + f.through.found.belief.mean[k]) / (1 + f.before.mean[k]))
		for p := row * n; p < (row+1)*n; p++ {
			light[p] *= by
		}
	}
	return light
}

// decode decodes light, a cycle's readings, and completes its lost rows, whose readings
// it puts into light, by the dark columns.
func (f *termsFit) decode(decoded, light []float32, i int) error {
	d, n := f.through.dark, len(f.places)
	lost := d.cycles[i].lost()
	for _, k := range lost {
		clear(light[k*n : (k+1)*n])
	}
	fillMean(light, lost, d.checks.Code().V(), n)
	f.terms.decoder.Decode(decoded, light, n, n)
	if len(lost) == 0 {
		return nil
	}
	noise := make([]float64, d.checks.Code().V())
	for k := range noise {
		noise[k] = 1
	}
	restored, err := d.checks.WithoutPedestal().NewRestorer().Lost(lost, noise)
	if err != nil {
		return nil // the mean has to do
	}
	missing := make([]float32, len(lost)*n)
	restored.Apply(decoded, missing, n, n)
	for a, k := range lost {
		for p := range n {
			light[k*n+p] += missing[a*n+p]
		}
	}
	return nil
}

// fitCycle fits the terms together with the throughput of cycle i, twice: the second time
// with light that the first corrected.
func (f *termsFit) fitCycle(i int, light, decoded []float32) error {
	d, n := f.through.dark, len(f.places)
	v, b := d.checks.Code().V(), &f.blocks[i]
	var looked []int
	for m, t := range f.terms.tables {
		if t != nil {
			looked = append(looked, m)
		}
	}
	_, prior := f.before.ofCycle(d.cycles[i])
	priors := []*mat.SymDense{prior}
	for _, m := range looked {
		rms := []float64{priorSlope, priorLines}[m]
		s := mat.NewSymDense(v, nil)
		for k := range v {
			s.SetSym(k, k, rms*rms)
		}
		priors = append(priors, s)
	}
	weights := make([][]float32, len(looked))
	for a := range weights {
		weights[a] = make([]float32, v*n)
	}
	var fit *hadamard.TermsFit
	for pass := range termPasses {
		g, err := hadamard.NewTermGram(d.sums[i].checks, f.terms.decoder, len(looked))
		if err != nil {
			return err
		}
		if err := f.decode(decoded, light, i); err != nil {
			return err
		}
		for a, m := range looked {
			f.terms.weigh(weights[a], m, decoded, f.places, n)
			if m == termLines {
				g.Know(a + 1)
			}
		}
		g.Add(b.y, light, b.s2, weights, n, n, 0)
		if fit, err = d.sums[i].checks.ThroughputTerms(g, priors, f.through.found.kept); err != nil {
			return err
		}
		if pass < termPasses-1 {
			next := make([]float32, len(light))
			fit.Correct(next, b.y, light, weights, g, n, n)
			light = next
		}
	}
	f.keep(i, looked, fit)
	return nil
}

// keep takes over what a cycle's fit found.
func (f *termsFit) keep(i int, looked []int, fit *hadamard.TermsFit) {
	c, steps := f.through.dark.cycles[i], len(f.reduction.seq.Steps)
	factor, _ := f.before.ofCycle(c)
	f.joint.add(c, factor, fit.Throughput)
	f.joint.pixels += f.through.dark.sums[i].gram.Pixels
	f.joint.kept = f.joint.kept && fit.Throughput.Kept
	for a, m := range looked {
		found := fit.Terms[a]
		h, own := &f.heldOut[m], found.HeldOut
		h.Before, h.ExpectedBefore = h.Before+own.Before, h.ExpectedBefore+own.ExpectedBefore
		h.After, h.ExpectedAfter = h.After+own.After, h.ExpectedAfter+own.ExpectedAfter
		h.SD = math.Hypot(h.SD, own.SD)
		if !found.Kept {
			continue
		}
		f.kept[m] = true
		if f.terms.e[m] == nil {
			f.terms.e[m], f.terms.variance[m] = make([]float64, steps), make([]float64, steps)
		}
		for row, k := range c.frame {
			if k >= 0 {
				step := f.through.frames[k].Step
				f.terms.e[m][step], f.terms.variance[m][step] = found.E[row], found.Posterior.At(row, row)
			}
		}
	}
}

// takeTerms takes the throughput from the fit with the terms, whose errors go with
// those of the terms, and adds the sample up once more without them, for what else is
// measured on it.
func (r *reduction) takeTerms(ctx context.Context, f *termsFit) error {
	t, old := f.through, f.through.dark
	again, err := newDarkFit(old.checks, old.cycles, old.excess, old.workers)
	if err != nil {
		return err
	}
	t.belief, t.corrected = f.before, len(t.outside) > 0
	f.joint.heldOut = t.found.heldOut
	t.found = f.joint
	if f.joint.kept {
		t.belief, t.corrected = f.joint.belief, true
	}
	again.neighbour, again.terms, again.frames = old.neighbour, r.correction.terms, t.frames
	for k := range t.frames {
		again.base = append(again.base, 1+t.belief.mean[k])
	}
	s := r.codedSampler(r.correction.offset, r.sampleSize())
	if err := s.each(ctx, func(chunk *sample) error { return again.add(ctx, chunk) }); err != nil {
		return err
	}
	if t.dark = again; f.joint.kept {
		again.level(t.belief)
	}
	t.methods(len(t.outside))
	t.addMethod(methodDark, f.joint.belief, f.joint.kept)
	t.reportTerms(r.correction.terms)
	return nil
}

// methods forgets all methods and curves but the first n.
func (t *throughput) methods(n int) {
	t.report.Methods, t.curves = t.report.Methods[:n], t.curves[:n]
}

// reportTerms lists the terms that are corrected.
func (t *throughput) reportTerms(found *terms) {
	for m, e := range found.e {
		if e == nil {
			continue
		}
		one := product.ThroughputTerm{Name: termNames[m]}
		for _, f := range t.frames {
			one.RMS += e[f.Step] * e[f.Step] / float64(len(t.frames))
			one.Error += found.variance[m][f.Step] / float64(len(t.frames))
		}
		one.RMS, one.Error = math.Sqrt(one.RMS), math.Sqrt(one.Error)
		t.report.Terms = append(t.report.Terms, one)
	}
}

// freeOfTerms adds to a block of a cycle what its readings lack by the terms: y are
// readings as they come, whose throughput is known well enough to make light of them.
func (d *darkFit) freeOfTerms(y []float32, pixels []place, stride int, c *cycle) {
	if d.terms == nil {
		return
	}
	v := d.checks.Code().V()
	steps, factor := make([][]int, v), make([]float32, v)
	for row, k := range c.frame {
		factor[row] = 1
		if k >= 0 {
			steps[row], factor[row] = []int{d.frames[k].Step}, float32(d.base[k])
		}
	}
	e, variance := d.terms.byRow(steps)
	w := d.terms.newWork(struckChunk)
	for p0 := 0; p0 < len(pixels); p0 += struckChunk {
		n := min(struckChunk, len(pixels)-p0)
		for p, at := range pixels[p0 : p0+n] {
			w.places[p] = d.terms.place(at.x, at.y)
		}
		copyBlock(w.lacks, y[p0:], v, n, n, stride)
		for k, by := range factor {
			for p := k * n; p < (k+1)*n; p++ {
				w.lacks[p] *= by
			}
		}
		fillMean(w.lacks, c.lost(), v, n)
		d.terms.decoder.Decode(w.light, w.lacks, n, n)
		d.terms.lack(w, &e, &variance, nil, n)
		for k, by := range factor {
			for p, x := range w.lacks[k*n : (k+1)*n] {
				y[k*stride+p0+p] += x / by
			}
		}
	}
}
