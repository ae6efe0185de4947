package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// lampKelvin is the colour that a continuum lamp is taken to have before its
// own colour is fitted: tungsten halogen lamps burn near 3000 K (common practice,
// no source).
const lampKelvin = 3000

// flatPasses over the coded lamp flat: the second takes the first's solution as
// its template (see calib.FlatFit).
const flatPasses = 2

// flats measures the response of pixels, slit and light path, the neighbour term
// and the leak.
func (r *reduction) flats(ctx context.Context, m *wholeMasters) error {
	if why := r.flatLacks(); why != "" {
		r.noFlat(errors.New(why))
		return nil
	}
	r.warnMissing(sequence.Flat, len(r.roles.calibration.lamps.all()))
	r.degradeMissing()
	err := r.pixelFlat(ctx, m)
	if err == nil {
		err = r.slitFlat(ctx, m)
	}
	if err == nil {
		r.doubtStuck()
		err = r.flatDepth(ctx, m)
	}
	if errors.Is(err, calib.ErrNoLight) {
		r.optics.pixel, r.optics.response = nil, nil
		r.noFlat(err)
		return nil
	}
	return err
}

// degradeMissing tells that the neighbour term was to be measured and cannot be.
func (r *reduction) degradeMissing() {
	l := &r.roles.calibration.lamps
	have := map[sequence.Pattern]int{
		sequence.PatternOn: len(l.on), sequence.PatternEven: len(l.even),
		sequence.PatternOdd: len(l.odd), sequence.PatternOff: len(l.off),
	}
	for _, i := range r.seq.StepsOf(sequence.Flat) {
		pattern, _ := r.seq.Pattern(i)
		if n, wanted := have[pattern]; wanted && n == 0 {
			r.degrade("the light of open neighbours is not measured: all lamp frames with the mask of step %d are missing", r.seq.Steps[i].Step)
			return
		}
	}
}

// noFlat leaves the response uncorrected, flags it and says why.
func (r *reduction) noFlat(why error) {
	r.optics.noFlat = true
	r.degrade("the flat field is not corrected, and every voxel is flagged LOWFLAT: %v", why)
}

// flatLacks says what the coded cycle lacks; empty if nothing. A cycle without one of
// its rows cannot be decoded unless the dark columns restore it: the lamp's light of all
// elements would be missing from each.
func (r *reduction) flatLacks() string {
	const off = "or say `flat: {use: off}` in the recipe"
	l := &r.roles.calibration.lamps
	lost := l.lost()
	switch {
	case l.coded == nil:
		return "there is no coded lamp frame; plan or repeat a coded flat cycle, " + off
	case len(lost) == 0 || r.lampRestores(lost):
		return ""
	}
	have := r.seq.V - len(lost)
	steps := r.lampSteps(lost)
	const named = 8
	if len(steps) > named {
		return fmt.Sprintf("%d of %d coded lamp frames are there; repeat the cycle, %s", have, r.seq.V, off)
	}
	return fmt.Sprintf("%d of %d coded lamp frames are there; repeat step %s, %s", have, r.seq.V, strings.Join(steps, ", "), off)
}

// lampRestores tells whether lost rows of the coded cycle can be restored without more
// noise than is tolerable, and says so.
func (r *reduction) lampRestores(lost []int) bool {
	code, err := r.code()
	if err != nil {
		return false // said when the cycle is decoded
	}
	l := &r.roles.calibration.lamps
	p, lack := r.newRepair(r.newDecoder(code, l.coded, nil), l.off)
	if lack != nil || math.Sqrt(p.lost.Growth) > troubledGrowth {
		return false
	}
	r.warn("%d of %d coded lamp frames are missing: they are restored from the dark columns", len(lost), r.seq.V)
	return true
}

// lampSteps names the flat steps that show rows of the code.
func (r *reduction) lampSteps(rows []int) []string {
	var steps []string
	for _, i := range r.seq.StepsOf(sequence.Flat) {
		if pattern, row := r.seq.Pattern(i); pattern == sequence.PatternRow && slices.Contains(rows, row) {
			steps = append(steps, fmt.Sprint(r.seq.Steps[i].Step))
		}
	}
	return steps
}

// pixelFlat measures the response of the pixels from the coded cycle, which adds up to
// k all-on frames. The all-on frames themselves are few beside it, and kept for
// flatDepth.
func (r *reduction) pixelFlat(ctx context.Context, m *wholeMasters) error {
	var frames []*exposure.Frame
	for _, list := range r.roles.calibration.lamps.coded {
		frames = append(frames, list...)
	}
	sum, err := r.sumExposures(ctx, frames, m, true)
	if err != nil {
		return err
	}
	expected := make([]float32, len(sum.Signal))
	p := r.seq.Profile
	if err := calib.LampShape(expected, r.optics.geometry, r.seq.N(), r.camera.Columns, p.Spectrograph.LSFFWHMPx, r.lampAt); err != nil {
		return err
	}
	shift := make([]float64, r.camera.Columns)
	for x := range shift {
		shift[x] = r.optics.geometry.TraceShift(float64(x))
	}
	r.optics.pixel, err = calib.DefaultPixelRule().Measure(ctx, sum.Signal, sum.Variance, sum.Flags, expected, shift)
	if err == nil {
		r.flagDarkAmplifiers()
	}
	return err
}

// slitFlat decodes the coded lamp frames and fits slit function and efficiency, the
// neighbour term and the leak. The second pass is freed of the first's neighbour term,
// whose ghosts would else be taken for a slit function.
func (r *reduction) slitFlat(ctx context.Context, m *wholeMasters) error {
	code, err := r.code()
	if err != nil {
		return err
	}
	s := shape{
		columns: r.camera.Columns, rows: r.camera.Rows, slots: r.seq.V, elements: r.seq.N(),
		voxels: r.schema.Grid.Count, cube: true, uniform: code.Design().IsS(),
	}
	rectify, err := newRectifier(r.optics.geometry, r.schema.Axis(), s, r.usage, r.opts.Workers)
	if err != nil {
		return fmt.Errorf("the wavelength grid of %s: %w", r.gridSource(), err)
	}
	s.margin = rectify.margin(s.rows)
	fit, err := calib.NewFlatFit(r.flatRule(rectify), s.elements, s.rows, s.voxels, r.lampLight(), r.lampLit())
	if err != nil {
		return err
	}
	terms, err := r.newLampTerms(ctx, m)
	if err != nil {
		return err
	}
	for range flatPasses {
		w, err := r.flatSweep(code, s, rectify, fit)
		if err != nil {
			return err
		}
		if err := terms.begin(&r.optics); err != nil {
			return err
		}
		w.light = terms.addRows
		if err := w.run(ctx); err != nil {
			return err
		}
		for _, frames := range r.roles.calibration.lamps.coded {
			r.lookAt(len(frames))
		}
		r.looked.Add(r.masterBytes())
		if r.optics.response, err = fit.Solve(); err != nil {
			return err
		}
		if err := terms.solve(&r.optics); err != nil {
			return err
		}
	}
	return nil
}

// lampTermBytes is what lampTerms and the whole masters before them hold a pixel.
const lampTermBytes = 2*exposureBytes + 3*bytesFloat + 2

// flatSweep goes once through the coded lamp frames.
func (r *reduction) flatSweep(code *hadamard.Code, s shape, rectify *rectifier, fit *calib.FlatFit) (*sweep, error) {
	l := &r.roles.calibration.lamps
	h, err := s.heights(r.opts.MemoryBytes - r.heldBytes() - lampTermBytes*int64(s.columns)*int64(s.rows))
	if err != nil {
		return nil, err
	}
	d := r.newDecoder(code, l.coded, nil)
	d.repair, _ = r.newRepair(d, l.off)
	if d.neighbours, err = r.optics.neighbourTerm(d); err != nil {
		return nil, err
	}
	reader := r.newReader(l.coded, l.seconds, masterLampOff, nil)
	reader.restore = d.repair != nil
	return &sweep{
		shape: s, heights: h, decoder: d, rectify: rectify, workers: r.opts.Workers,
		reader:   reader,
		pixel:    r.optics.pixel,
		progress: func(rows int) { r.opts.Progress("flats", rows, s.rows) },
		sink: func(ctx context.Context, out *outStrip) error {
			for i := range out.flags { // restored light is as good as any
				out.flags[i] &^= product.FlagRestored
			}
			groups := (s.elements + group - 1) / group
			return parallel.Do(ctx, r.opts.Workers, groups, func(_, i int) error {
				fit.AddStrip(out.y0, out.h, out.signal, out.variance, out.flags, i*group, min((i+1)*group, s.elements))
				return nil
			})
		},
	}, nil
}

// flatRule knows how resampling correlates voxels in the middle of the field.
func (r *reduction) flatRule(rectify *rectifier) calib.FlatRule {
	rule := calib.DefaultFlatRule()
	edges := make([]float64, r.schema.Grid.Count+1)
	y := r.camera.Rows / 2
	r.optics.geometry.Places(edges, float64(r.seq.N()-1)/2, float64(y), rectify.edges)
	rule.AlongWavelength, rule.AlongSlit = calib.Correlation(rectify.shift, rectify.columns, edges, y)
	return rule
}

// lampLight is what is known of the lamp's light in each voxel: a black body
// through the profile's throughput.
func (r *reduction) lampLight() []float64 {
	axis := r.schema.Axis()
	light := make([]float64, axis.Grid.Count)
	for l := range light {
		light[l] = r.lampAt(axis.ObservedNM(float64(l)))
	}
	return light
}

// lampAt is that light per nm, 1 at the centre of the band before the throughput.
func (r *reduction) lampAt(vacuumNM float64) float64 {
	s := &r.seq.Profile.Spectrograph
	return physics.PlanckPhotons(vacuumNM, lampKelvin) / physics.PlanckPhotons(s.CenterNM, lampKelvin) * s.Throughput.At(vacuumNM)
}
