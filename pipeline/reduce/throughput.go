package reduce

import (
	"context"
	"fmt"
	"math"

	"go.uber.org/zap"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
)

// throughput is what a reduction finds out about its science frames before it decodes
// them.
type throughput struct {
	frames []*exposure.Frame
	times  []float64 // of their middles, -0.5 to 0.5
	// minutes are the same from the first frame on.
	minutes []float64
	// belief is what is known of them after all methods; nil where an earlier run found
	// it, of which only the throughputs and their errors, c and err, were kept.
	belief *belief
	c, err []float64
	// corrected: something was measured that went into the correction.
	corrected bool
	outside   []outsideMethod
	curves    []report.Curve
	dark      *darkFit // nil without dark columns enough
	found     *darkResult
	report    product.Throughput
}

// measureThroughput is the stage that fills the correction.
func (r *reduction) measureThroughput(ctx context.Context) (int64, error) {
	r.correction = noCorrection(len(r.seq.Steps))
	if r.opts.Recipe.Throughput.Use == useOff || r.roles.science == 0 {
		return 0, nil
	}
	r.looked.Store(0)
	frames := r.scienceFrames()
	t := &throughput{frames: frames}
	t.times, t.minutes = r.times(frames)
	t.belief = newBelief(t.times)
	r.through = t
	var err error
	if t.report.Offset, err = r.measureOffsets(ctx, frames); err != nil {
		return 0, err
	}
	if err := r.measureOutside(ctx, t); err != nil {
		return 0, err
	}
	if t.dark, err = r.newDarkFit(t.frames); err != nil {
		return 0, err
	}
	if t.dark != nil {
		s := r.codedSampler(r.correction.offset, r.sampleSize())
		if err := s.each(ctx, func(chunk *sample) error { return t.dark.add(ctx, chunk) }); err != nil {
			return 0, err
		}
		typical, err := t.dark.typical(t.times)
		if err != nil {
			return 0, err
		}
		if len(t.outside) == 0 {
			t.belief = typical
		}
		before, err := r.fitDark(t, typical)
		if err != nil {
			return 0, err
		}
		if t.found != nil {
			if err := r.measureTerms(ctx, t, before); err != nil {
				return 0, err
			}
		}
	}
	if t.corrected {
		r.applyThroughput(t)
	}
	r.applyLeak(t)
	t.report.Verdict, t.report.State = r.throughputVerdict(t)
	return r.looked.Load(), ctx.Err()
}

// fitMatrices is how many square matrices of the code's size a fit holds at most.
const fitMatrices = 24

// newDarkFit gives the fit by dark columns; nil if there are too few of them. The error
// says how much memory it needs.
func (r *reduction) newDarkFit(frames []*exposure.Frame) (*darkFit, error) {
	dark := r.seq.DarkColumns()
	code, err := r.code()
	if err != nil || len(dark) == 0 {
		return nil, err
	}
	checks, err := hadamard.NewChecks(code, dark)
	if err != nil {
		return nil, err
	}
	if !checks.Reliable() {
		return nil, nil
	}
	v := int64(r.seq.V)
	if need := fitMatrices*8*v*v + runtimeBytes; need > r.opts.MemoryBytes {
		return nil, fmt.Errorf("--memory of %d MiB is too little to measure the throughput of %d code rows; give at least %d MiB, or say `throughput: {use: off}` in the recipe", r.opts.MemoryBytes>>20, v, need>>20+1)
	}
	d, err := newDarkFit(checks, r.cycles(frames), r.camera.PhotonExcess, r.opts.Workers)
	if err != nil {
		return nil, err
	}
	d.neighbour, err = r.sampleNeighbour(code)
	return d, err
}

// measureOutside takes the measurements that need no code: the monitor's table and the
// sentinel rows.
func (r *reduction) measureOutside(ctx context.Context, t *throughput) error {
	if isTable(r.opts.Recipe.Throughput.Use) {
		m, err := r.monitor(t.frames)
		if err != nil {
			return err
		}
		t.outside = append(t.outside, outsideMethod{methodMonitor, m})
	}
	s, err := r.measureSentinel(ctx, t.frames)
	if err != nil {
		return err
	}
	if s != nil {
		t.outside = append(t.outside, outsideMethod{methodSentinel, s.c})
		t.report.Image = s.image()
	}
	for _, o := range t.outside {
		alone := newBelief(t.times)
		if err := alone.learn(o.measured); err != nil {
			return err
		}
		if len(t.report.Methods) > 0 {
			growth, err := r.agree(t.belief, o, t.report.Methods[0].Name)
			if err != nil {
				return err
			}
			o.measured.grow(growth)
		}
		if err := t.belief.learn(o.measured); err != nil {
			return err
		}
		t.addMethod(o.name, alone, true)
		t.corrected = true
	}
	return nil
}

// relearn holds the methods that need no code against what the dark columns say alone, and
// believes again where their errors had to grow.
func (r *reduction) relearn(t *throughput, dark *belief) error {
	grown := false
	for i, o := range t.outside {
		growth, err := r.agree(dark, o, methodDark)
		if err != nil {
			return err
		}
		if growth > 1 {
			o.measured.grow(growth)
			for k := range t.curves[i].Err {
				t.curves[i].Err[k] *= growth
			}
			t.report.Methods[i].Error *= growth
			grown = true
		}
	}
	if !grown {
		return nil
	}
	t.belief = newBelief(t.times)
	for _, o := range t.outside {
		if err := t.belief.learn(o.measured); err != nil {
			return err
		}
	}
	return nil
}

// outsideMethod is a measurement that needs no code.
type outsideMethod struct {
	name     string
	measured *relative
}

// agree warns if a measurement and what is believed without it differ by more than
// chance gives once in a million, and gives by what the measurement's errors are to be
// multiplied then, so that the difference is what is due (Birge 1932, Phys. Rev. 40, 207);
// 1 where they agree.
func (r *reduction) agree(b *belief, o outsideMethod, others string) (growth float64, err error) {
	chi2, dof, err := b.compare(o.measured)
	if err != nil {
		return 1, err
	}
	if limit := float64(dof) + 5*math.Sqrt(2*float64(dof)); dof == 0 || chi2 <= limit {
		return 1, nil
	}
	growth = math.Sqrt(chi2 / float64(dof))
	r.warn("the throughput by %s and by %s disagree: chi-square %.0f where %d is due, so that errors of the former count %.1f times; look for clouds that one of them did not see, light lost at a sentinel's slit, or errors that are given too small", o.name, others, chi2, dof, growth)
	return growth, nil
}

// fitDark measures the throughput by the dark columns: alone, to compare, of frames that are
// typical, and with what other methods told. before is what was believed without them.
func (r *reduction) fitDark(t *throughput, typical *belief) (before *belief, err error) {
	alone, err := t.dark.fit(typical)
	if err != nil {
		return nil, err
	}
	if !(alone.heldOut.ExpectedBefore > 0) { // lost frames took as many checks as half of the dark columns give
		t.dark = nil
		return t.belief.clone(), nil
	}
	t.found = alone
	t.addHeldOut("throughput by dark columns", alone.heldOut, alone.kept)
	before = t.belief.clone()
	if len(t.outside) > 0 {
		if err := r.relearn(t, alone.belief); err != nil {
			return nil, err
		}
		before = t.belief.clone()
		if t.found, err = t.dark.fit(t.belief); err != nil {
			return nil, err
		}
		all := t.found.heldOut
		if !t.found.kept { // then the other methods' correction is left as it was
			all.After, all.ExpectedAfter = all.Before, all.ExpectedBefore
		}
		all.Before, all.ExpectedBefore = alone.heldOut.Before, alone.heldOut.ExpectedBefore
		t.addHeldOut("throughput by all methods", all, true)
	}
	t.addMethod(methodDark, alone.belief, t.found.kept)
	if t.found.kept {
		t.belief, t.corrected = t.found.belief, true
	}
	r.log.Info("throughput", zap.Float64("before", t.before()), zap.Float64("after", t.after()), zap.Bool("kept", t.found.kept),
		zap.Float64("patterns", t.found.directions), zap.Int("pixels", t.found.pixels), zap.Int("struck", t.dark.struck))
	return before, nil
}

// addHeldOut lists a step of the correction.
func (t *throughput) addHeldOut(step string, h hadamard.HeldOut, kept bool) {
	t.report.HeldOut = append(t.report.HeldOut, product.HeldOutStep{
		Step: step, Before: h.Before / h.ExpectedBefore, After: h.After / h.ExpectedAfter, Kept: kept,
	})
}

// addMethod lists a method with what it measured.
func (t *throughput) addMethod(name string, b *belief, used bool) {
	own := b.clone()
	own.normalise()
	t.addCurve(name, own.c(), own.errors())
	rms, err := scatter(own.c(), own.errors())
	t.report.Methods = append(t.report.Methods, product.ThroughputMethod{Name: name, RMS: rms, Error: err, Used: used})
}

// addCurve keeps a method's throughputs for the report.
func (t *throughput) addCurve(name string, c, sigma []float64) {
	t.curves = append(t.curves, report.Curve{Method: name, Minutes: t.minutes, C: c, Err: sigma})
}

// reportCurves are the methods' curves, that of all methods first where there are
// several.
func (t *throughput) reportCurves() []report.Curve {
	if t == nil {
		return nil
	}
	if len(t.curves) < 2 || !t.corrected {
		return t.curves
	}
	all := report.Curve{Method: "together", Minutes: t.minutes}
	all.C, all.Err = t.believed()
	return append([]report.Curve{all}, t.curves...)
}

// believed are the throughputs after all methods and their errors.
func (t *throughput) believed() (c, err []float64) {
	if t.belief == nil {
		return t.c, t.err
	}
	return t.belief.c(), t.belief.errors()
}

// scatter is the rms of c around 1 and that of its errors.
func scatter(c, sigma []float64) (rms, err float64) {
	for k := range c {
		rms += (c[k] - 1) * (c[k] - 1)
		err += sigma[k] * sigma[k]
	}
	n := float64(max(1, len(c)))
	return math.Sqrt(rms / n), math.Sqrt(err / n)
}

// sampleNeighbour gives what takes the light of open neighbours out of readings,
// [code row][pixel] of the given stride: it decodes, corrects as the strips are
// corrected, and predicts the readings again. Rows without a frame are taken as the
// mean of the others. It is nil where there is nothing to correct.
func (r *reduction) sampleNeighbour(code *hadamard.Code) (func(y []float32, pixels []place, stride int, lost []int), error) {
	d := r.newDecoder(code, r.roles.slots, nil)
	term, err := r.optics.neighbourTerm(d)
	if term == nil || err != nil {
		return nil, err
	}
	return func(y []float32, pixels []place, stride int, lost []int) {
		v := d.slots
		samples, decoded := make([]float32, v*struckChunk), make([]float32, v*struckChunk)
		size, slope := make([]float32, struckChunk), make([]float32, struckChunk)
		for p0 := 0; p0 < len(pixels); p0 += struckChunk {
			n := min(struckChunk, len(pixels)-p0)
			copyBlock(samples, y[p0:], v, n, n, stride)
			fillMean(samples, lost, v, n)
			d.code.Decode(decoded, samples, n, n)
			for p, at := range pixels[p0 : p0+n] {
				size[p], slope[p] = term.at(at.x, at.y)
			}
			term.pairs.Correct(decoded, size, slope, n, n)
			d.code.Predict(samples, decoded, n, n)
			for _, k := range lost {
				clear(samples[k*n : (k+1)*n])
			}
			copyBlock(y[p0:], samples, v, n, stride, n)
		}
	}, nil
}

// copyBlock copies rows of n samples between blocks of different strides.
func copyBlock(dst, src []float32, rows, n, dstStride, srcStride int) {
	for i := range rows {
		copy(dst[i*dstStride:i*dstStride+n], src[i*srcStride:i*srcStride+n])
	}
}

// fillMean puts the mean of the other rows into the lost ones.
func fillMean(block []float32, lost []int, rows, n int) {
	if len(lost) == 0 || len(lost) == rows {
		return
	}
	for p := range n {
		sum := float32(0)
		for i := range rows {
			sum += block[i*n+p] // lost rows hold 0
		}
		for _, k := range lost {
			block[k*n+p] = sum / float32(rows-len(lost))
		}
	}
}

// applyThroughput puts what is believed into the correction and the ledger.
func (r *reduction) applyThroughput(t *throughput) {
	t.belief.normalise()
	c, sigma := t.belief.c(), t.belief.errors()
	for k, f := range t.frames {
		r.correction.factor[f.Step] = 1 + t.belief.mean[k]
		r.correction.variance[f.Step] = max(0, t.belief.covariance.At(k, k))
		entry := &r.night.Ledger[f.Entry]
		entry.Throughput, entry.ThroughputErr = c[k], sigma[k]
	}
}

// quality fills in run.json's figures; nothing if there was no correction.
func (t *throughput) quality(q *product.Quality) {
	if t == nil || !t.corrected {
		return
	}
	rms, err := scatter(t.believed())
	q.ThroughputRMS, q.ThroughputErr = &rms, &err
}

// section is run.json's; nil if throughput was not asked for.
func (t *throughput) section() *product.Throughput {
	if t == nil {
		return nil
	}
	shares(t.report.Methods)
	return &t.report
}

// shares divides the information, the inverse variance, among the methods in use.
func shares(methods []product.ThroughputMethod) {
	total := 0.0
	for _, m := range methods {
		if m.Used && m.Error > 0 {
			total += 1 / (m.Error * m.Error)
		}
	}
	for i, m := range methods {
		if m.Used && m.Error > 0 {
			methods[i].Share = 1 / (m.Error * m.Error) / total
		}
	}
}
