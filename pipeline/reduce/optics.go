package reduce

import (
	"context"
	"errors"
	"fmt"
	"slices"

	"go.uber.org/zap"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// optics is what the lamps tell of the instrument, and what is taken from the
// profile where they do not.
type optics struct {
	geometry calib.Geometry
	// nominalWave: wavelengths were asked of the arcs and are the profile's.
	nominalWave bool
	// noFlat: the response was asked of the flats and is taken as even.
	noFlat bool
	// darkAmplifiers show no light of the lamp.
	darkAmplifiers []int
	arcs           *calib.ArcSolution
	trace          *calib.TraceSolution
	pixel          *calib.PixelResponse
	response       *calib.Response
	neighbour      *calib.ColourTerm
	leak           *calib.ColourTerm
	stuck          *stuckMirrors // nil where all mirrors move
}

// unknown is the flags of every voxel for what was asked of the lamps in vain.
func (o *optics) unknown() int16 {
	var flags int16
	if o.nominalWave {
		flags |= product.FlagNominalWave
	}
	if o.noFlat {
		flags |= product.FlagLowFlat
	}
	return flags
}

// pixelVariance is the mean relative variance of the response of a lit pixel.
func (o *optics) pixelVariance() float64 {
	if o.pixel == nil {
		return 0
	}
	sum, n := 0.0, 0
	for i, f := range o.pixel.Flags {
		if f == 0 {
			sum += float64(o.pixel.Variance[i])
			n++
		}
	}
	return sum / float64(max(n, 1))
}

// calibrate measures the optics: wavelengths by the arcs, the trace by the ends of
// the slit, the responses by the flats. What cannot be measured stays as the
// profile says and is a reason why the product is not whole.
func (r *reduction) calibrate(ctx context.Context) (int64, error) {
	r.usage = newUsage(r.seq)
	if err := r.placeVoxels(); err != nil {
		return 0, err
	}
	r.optics.geometry = nominalGeometry(r.seq)
	if err := r.checkGrid(); err != nil {
		return 0, err
	}
	arc, flat := r.opts.Recipe.Arc.Use, r.opts.Recipe.Flat.Use
	if arc != useOff && arc != useAuto {
		if err := r.borrowGeometry(arc); err != nil {
			r.nominal(err)
		}
		arc = useOff
	}
	r.placeStuck()
	if arc == useOff && flat == useOff {
		return 0, nil
	}
	m, err := r.masters.whole(r.camera.Rows, r.camera.Columns)
	if err != nil {
		return 0, err
	}
	r.looked.Add(r.masterBytes())
	if err := r.findDarkAmplifiers(ctx, m); err != nil {
		return 0, err
	}
	if err := r.checkDetector(ctx, m); err != nil {
		return 0, err
	}
	if arc == useAuto {
		if err := r.solveArcs(ctx, m); err != nil {
			return 0, err
		}
		if err := r.solveTrace(ctx, m); err != nil {
			return 0, err
		}
	}
	r.placeStuck()
	if flat == useAuto {
		if err := r.flats(ctx, m); err != nil {
			return 0, err
		}
	}
	r.flagDarkAmplifiers()
	return r.looked.Load(), ctx.Err()
}

// checkGrid refuses a grid that the geometry cannot serve.
func (r *reduction) checkGrid() error {
	axis := r.schema.Axis()
	err := r.optics.geometry.Check(r.camera.Columns, r.camera.Rows, axis.FirstNM(), axis.LastNM())
	if err != nil {
		return fmt.Errorf("the wavelength grid of %s: %w", r.gridSource(), err)
	}
	return nil
}

// nominal keeps the profile's wavelengths, flags them and says why.
func (r *reduction) nominal(why error) {
	r.optics.nominalWave = true
	r.degrade("wavelengths are the profile's, flagged NOMINALWAVE: %v", why)
}

// degrade adds a reason why the product is not whole.
func (r *reduction) degrade(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	r.roles.degraded = append(r.roles.degraded, text)
	r.log.Info(text) // the command says it in the end
}

// warn adds something that the user should know of a whole product.
func (r *reduction) warn(format string, args ...any) {
	text := fmt.Sprintf(format, args...)
	r.roles.warnings = append(r.roles.warnings, text)
	r.log.Info(text) // the command says it in the end
}

// warnMissing tells of lamp frames that were planned and are not all there.
func (r *reduction) warnMissing(kind sequence.Kind, have int) {
	if planned := len(r.seq.StepsOf(kind)); have < planned {
		r.warn("%d of %d %s frames are missing", planned-have, planned, kind)
	}
}

// The wavelength solution is to be good to figurePx everywhere (one standard
// error); beyond hopelessPx the profile's is as good a guess.
const (
	figurePx   = 0.05
	hopelessPx = 1.0
)

// solveArcs finds and identifies the lines of the arc frames and fits the
// geometry to them.
func (r *reduction) solveArcs(ctx context.Context, m *wholeMasters) error {
	if len(r.roles.arcs) == 0 {
		r.nominal(errors.New("there is no arc frame; plan arcs, or say `arc: {use: off}` in the recipe"))
		return nil
	}
	lines, err := r.arcLines()
	if err != nil {
		r.nominal(err)
		return nil
	}
	r.warnMissing(sequence.Arc, len(r.roles.arcs))
	frames := make([]calib.ArcFrame, len(r.roles.arcs))
	rule := calib.DefaultPeakRule(r.seq.Profile.Spectrograph.LSFFWHMPx)
	err = r.eachExposure(ctx, r.roles.arcs, m, false, func(i int, e *calib.Exposure) error {
		_, element := r.seq.Pattern(r.roles.arcs[i].Step)
		frames[i].Element, frames[i].Lines = element, lines[i]
		for _, rows := range r.optics.stuck.quiet(r.litStretches(element)) {
			peaks, err := rule.Find(*e, rows[0], rows[1])
			if err != nil {
				return err
			}
			frames[i].Peaks = append(frames[i].Peaks, peaks...)
		}
		return nil
	})
	if err != nil {
		return err
	}
	r.optics.stuck.dropStuckLines(frames, rule.FWHMPx)
	solution, err := calib.SolveArcs(r.optics.geometry, frames, r.arcRule())
	var unknown *calib.ArcError
	if errors.As(err, &unknown) {
		r.nominal(r.maskFault(frames, err))
		return nil
	}
	if err != nil {
		return err
	}
	switch worst := r.worstError(solution); {
	case !(worst < hopelessPx):
		r.nominal(r.maskFault(frames, fmt.Errorf("the %d arc lines leave an error of %.2g px somewhere in the cube; use a lamp with lines all over the band", solution.Lines, worst)))
		return nil
	case worst > figurePx:
		r.warn("wavelengths are uncertain by %.2g px somewhere in the cube; use a lamp with lines all over the band", worst)
	}
	r.optics.arcs, r.optics.geometry = solution, solution.Geometry
	if err := r.persistence(m, frames); err != nil {
		return err
	}
	r.log.Info("arcs", zap.Float64("rms_px", solution.RMSPx), zap.Int("lines", solution.Used), zap.Int("rejected", solution.Rejected))
	return nil
}

// arcLines lists what the lamp of each arc frame may show in the band and a tenth of
// it beyond. The error names a lamp of which there is no list.
func (r *reduction) arcLines() ([][]calib.LampLine, error) {
	axis := r.schema.Axis()
	first, last := axis.FirstNM(), axis.LastNM()
	beyond := (last - first) / 10
	all := make([][]calib.LampLine, len(r.roles.arcs))
	for i, f := range r.roles.arcs {
		var err error
		if all[i], err = lampLines(r.seq.Steps[f.Step].Lamp, first-beyond, last+beyond); err != nil {
			return nil, err
		}
	}
	return all, nil
}

// arcRule bounds the search for the band of the cube's grid.
func (r *reduction) arcRule() calib.ArcRule {
	axis := r.schema.Axis()
	return calib.DefaultArcRule(axis.FirstNM(), axis.LastNM(), r.seq.Profile.Spectrograph.LSFFWHMPx)
}

// solveTrace measures the trace at the ends of the slit: in the lamp's all-on
// frames where all elements end at the same rows, or else in the arcs.
func (r *reduction) solveTrace(ctx context.Context, m *wholeMasters) error {
	rule := calib.DefaultTraceRule(r.seq.Profile.Spectrograph.LSFFWHMPx)
	why := errors.New("trace: no end of the lit rows lies on the detector of a lamp frame")
	for _, find := range []func(context.Context, *wholeMasters, calib.TraceRule) ([]calib.EdgePoint, error){r.lampEnds, r.arcEnds} {
		points, err := find(ctx, m, rule)
		if err != nil {
			return err
		}
		if points == nil {
			continue
		}
		solution, err := calib.FitTrace(r.optics.geometry, points, r.camera.Columns)
		var unknown *calib.TraceError
		if errors.As(err, &unknown) {
			why = err
			continue
		}
		if err != nil {
			return err
		}
		r.optics.trace = solution
		r.optics.geometry.TraceTilt, r.optics.geometry.TraceCurve = solution.TraceTilt, solution.TraceCurve
		return nil
	}
	r.optics.nominalWave = true
	r.degrade("the trace is the profile's, and every voxel is flagged NOMINALWAVE: %v", why)
	return nil
}

// lampEnds finds the ends of the slit in the lamp's all-on frames; nil where they
// cannot tell.
func (r *reduction) lampEnds(ctx context.Context, m *wholeMasters, rule calib.TraceRule) ([]calib.EdgePoint, error) {
	frames := r.roles.calibration.lamps.on
	ends, same := r.commonEnds()
	if !same || len(frames) == 0 {
		return nil, nil
	}
	e, err := r.sumExposures(ctx, frames, m, true)
	if err != nil {
		return nil, err
	}
	return rule.Find(*e, ends, 0)
}

// arcEnds finds the ends of each element that the arcs light.
func (r *reduction) arcEnds(ctx context.Context, m *wholeMasters, rule calib.TraceRule) ([]calib.EdgePoint, error) {
	found := make([][]calib.EdgePoint, len(r.roles.arcs))
	err := r.eachExposure(ctx, r.roles.arcs, m, false, func(i int, e *calib.Exposure) (err error) {
		_, element := r.seq.Pattern(r.roles.arcs[i].Step)
		found[i], err = rule.Find(*e, r.ends(element), i*maxEnds)
		return err
	})
	return slices.Concat(found...), err
}
