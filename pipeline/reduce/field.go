package reduce

import (
	"errors"
	"fmt"
	"math"
	"time"

	"go.uber.org/zap"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// placeVoxels says where on the sky and in wavelength the cube's voxels lie, and where in
// the field of view the light for them is to be taken.
func (r *reduction) placeVoxels() error {
	night := product.NewSchema(r.seq)
	r.schema = night
	r.schema.Grid = r.opts.Recipe.grid(r.seq.Profile)
	var onto *product.Schema
	if path := r.opts.Recipe.Grid.Onto; path != "" {
		s, err := r.readOnto(path, night)
		if err != nil {
			return err
		}
		onto, r.schema.Grid = s, s.Grid
	}
	r.setFrame(onto)
	if r.opts.Recipe.Grid.Refraction == useAuto {
		if err := r.refract(night); err != nil {
			r.degrade("refraction is left in the cube: %v", err)
		}
	}
	if onto != nil {
		r.shiftOnto(night, *onto)
	}
	return nil
}

// moved is the shift of the field, made if it is not there.
func (r *reduction) moved() *product.FieldShift {
	if r.shift == nil {
		n := r.schema.Grid.Count
		r.shift = &product.FieldShift{Elements: make([]float64, n), Rows: make([]float64, n)}
	}
	return r.shift
}

// refract fills in the mean shift of the science frames, weighed by their exposures: a
// wavelength's image stands R(L) - R(guide) nearer the zenith (Filippenko 1982). The
// target's zenith distance and parallactic angle are those of the middle of each exposure.
func (r *reduction) refract(night product.Schema) error {
	moments, err := r.moments()
	if err != nil {
		return fmt.Errorf("no air mass can be computed: %w", err)
	}
	guide := r.opts.Recipe.Grid.GuideNM
	if guide == 0 {
		guide = r.seq.Profile.Spectrograph.CenterNM
	}
	site, target := r.seq.Profile.Site, r.seq.Target
	air := site.Atmosphere()
	axis, shift := r.schema.Axis(), product.FieldShift{GuideNM: guide, Atmosphere: &air}
	n := axis.Grid.Count
	// The sum over frames of tan z towards the zenith is the same for all wavelengths.
	var east, north, airmass, weight float64
	for _, m := range moments {
		z := physics.ApparentZenithDistance(physics.ZenithDistance(target.RADeg, target.DecDeg, m.middle, site.LatitudeDeg, site.LongitudeEastDeg))
		if !(z < mostZenithDeg) {
			return fmt.Errorf("no air mass can be computed: the target stands %.1f degrees from the zenith at %s; check the site's longitude (east), the target's ra_deg (degrees, not hours) and the clock of the frames", z, m.middle.Format(time.RFC3339))
		}
		sin, cos := math.Sincos(physics.TargetParallacticAngle(target.RADeg, target.DecDeg, m.middle, site.LatitudeDeg, site.LongitudeEastDeg) * math.Pi / 180)
		tan := math.Tan(z * math.Pi / 180)
		east += m.seconds * tan * sin
		north += m.seconds * tan * cos
		airmass += m.seconds * physics.Airmass(z)
		weight += m.seconds
	}
	east, north, shift.Airmass = east/weight, north/weight, airmass/weight
	x0, y0 := night.Place(0, 0)
	for i := range n {
		up := air.DifferentialRefraction(axis.ObservedNM(float64(i)), guide, 45) // of tan z = 1
		if up != up {
			return fmt.Errorf("the air's refraction is not known at %g nm", axis.ObservedNM(float64(i)))
		}
		x, y := night.Place(up*east, up*north)
		shift.Elements, shift.Rows = append(shift.Elements, x-x0), append(shift.Rows, y-y0)
	}
	r.shift = &shift
	r.warnDrift(moments, shift, night)
	r.warnPointing(moments[0])
	r.log.Info("refraction", zap.Float64("airmass", shift.Airmass), zap.Float64("elements", shift.Elements[0]-shift.Elements[n-1]), zap.Float64("rows", shift.Rows[0]-shift.Rows[n-1]))
	return nil
}

// warnDrift tells of refraction that changes so much within the science frames that its
// mean does not stand for all of them.
func (r *reduction) warnDrift(moments []moment, s product.FieldShift, night product.Schema) {
	site, target := r.seq.Profile.Site, r.seq.Target
	least, most := math.Inf(1), 0.0
	for _, m := range moments {
		x := physics.TargetAirmass(target.RADeg, target.DecDeg, m.middle, site.LatitudeDeg, site.LongitudeEastDeg)
		tan := math.Tan(physics.AirmassZenithDistance(x) * math.Pi / 180)
		least, most = min(least, tan), max(most, tan)
	}
	axis := r.schema.Axis()
	arcsec := 0.0
	for _, i := range []float64{0, float64(axis.Grid.Count - 1)} {
		arcsec = max(arcsec, (most-least)*math.Abs(s.Atmosphere.DifferentialRefraction(axis.ObservedNM(i), s.GuideNM, 45)))
	}
	if voxel := 3600 * min(night.C1Deg, night.C2Deg); arcsec > voxel {
		r.warn("refraction changes by %.2g arcsec within the science frames at an end of the band, more than a voxel of %.2g: its mean is taken out, the rest blurs the image; plan shorter cycles, or guide within the band", arcsec, voxel)
	}
}

// warnPointing compares what a frame says of its place on the sky with the target's, of
// which air mass and refraction were computed.
func (r *reduction) warnPointing(m moment) {
	const degrees, airmass = 0.5, 0.05
	site, target, key := r.seq.Profile.Site, r.seq.Target, r.seq.Profile.Keywords
	h := m.frame.Image.Header
	if ra, err := h.Float(key.RA); err == nil {
		off := func(ra float64) float64 { return math.Abs(math.Remainder(ra-target.RADeg, 360)) }
		switch {
		case off(ra) <= degrees:
		case off(15*ra) <= degrees:
			r.warn("frame %s has %s = %g, the target's %g degrees in hours; the target's is used, but other programs will take it for degrees", m.frame.Name, key.RA, ra, target.RADeg)
		default:
			r.warn("frame %s has %s = %g where the target has %g degrees; check ra_deg, of which the refraction was computed", m.frame.Name, key.RA, ra, target.RADeg)
		}
	}
	if said, err := h.Float(key.Airmass); err == nil {
		x := physics.TargetAirmass(target.RADeg, target.DecDeg, m.middle, site.LatitudeDeg, site.LongitudeEastDeg)
		if math.Abs(said-x) > airmass*x {
			r.warn("frame %s has %s = %.3f where site, target and time give %.3f; check the profile's site and the target's place", m.frame.Name, key.Airmass, said, x)
		}
	}
}

// mostZenithDeg: nearer the horizon plane layers of air are no model.
const mostZenithDeg = 80

// ontoTolerance, in voxels, is how far the pixels of another cube may depart from a plain
// shift of this night's.
const ontoTolerance = 0.05

// readOnto reads the voxels of another run's cube and refuses one whose pixels are not
// this night's but for a shift.
func (r *reduction) readOnto(path string, night product.Schema) (*product.Schema, error) {
	f, err := fitsutil.Open(path)
	if err != nil {
		return nil, fmt.Errorf("grid.onto: %w", err)
	}
	defer f.Close() // only read from
	if name, err := f.HDUs()[0].Header.Str("PROFNAME"); err != nil || name != r.seq.ProfileName {
		return nil, fmt.Errorf("grid.onto: %s is of the instrument %q, not %q; give a cube of the same instrument", path, name, r.seq.ProfileName)
	}
	im, err := f.ImageNamed(product.Signal)
	if err != nil {
		return nil, fmt.Errorf("grid.onto: %w", err)
	}
	s, err := product.ReadSchema(im.Header, im.Axes)
	if err != nil {
		return nil, fmt.Errorf("grid.onto: %s: %w", path, err)
	}
	if s.Elements != night.Elements || s.Rows != night.Rows {
		return nil, fmt.Errorf("grid.onto: %s has %d elements and %d rows, this night %d and %d; plan both alike", path, s.Elements, s.Rows, night.Elements, night.Rows)
	}
	if math.Abs(s.C1Deg/night.C1Deg-1) > 1e-6 || math.Abs(s.C2Deg/night.C2Deg-1) > 1e-6 || s.Parity != night.Parity {
		return nil, fmt.Errorf("grid.onto: voxels of %s measure %.4g x %.4g arcsec on the sky, parity %+d, this night's %.4g x %.4g, %+d; give a cube of the same elements", path, 3600*s.C1Deg, 3600*s.C2Deg, s.Parity, 3600*night.C1Deg, 3600*night.C2Deg, night.Parity)
	}
	if have := frameOf(s.Frame); r.opts.Recipe.Grid.Frame != "" && r.opts.Recipe.Grid.Frame != have {
		return nil, fmt.Errorf("%s: grid.frame is %s, but the cube of grid.onto, %s, has wavelengths of the frame %s; leave grid.frame out", r.opts.Recipe.Name, r.opts.Recipe.Grid.Frame, path, have)
	}
	if s.Frame.Name == product.Heliocentric {
		return nil, errors.New("grid.onto: wavelengths in the frame of the sun's centre are not made here; give a cube of reduce")
	}
	x, y := ontoShift(night, s, 0, 0)
	if !(math.Abs(x) < float64(s.Elements)) || !(math.Abs(y) < float64(s.Rows)) {
		return nil, fmt.Errorf("grid.onto: %s shows another field: its centre lies %.4g elements and %.4g rows away from this night's", path, x, y)
	}
	for _, corner := range [][2]float64{{-1, -1}, {1, -1}, {-1, 1}, {1, 1}} {
		cx, cy := ontoShift(night, s, corner[0], corner[1])
		if off := math.Hypot(cx-x, cy-y); !(off < ontoTolerance) {
			return nil, fmt.Errorf("grid.onto: the field of %s is turned against this night's (position angles %.4g and %.4g degrees): its corners are off by %.3g voxels; plan with rotang_deg of that cube", path, s.RotangDeg, night.RotangDeg, off)
		}
	}
	return &s, nil
}

// ontoShift is where the light of a place of another cube lies in this night's field less
// that place itself, in elements and rows; a and b, -1 to 1, say where between the corners.
func ontoShift(night, s product.Schema, a, b float64) (elements, rows float64) {
	j, y := (1+a)/2*float64(s.Elements-1), (1+b)/2*float64(s.Rows-1)
	ra, dec := s.Sky(j, y)
	x, at := night.Place(physics.Gnomonic(ra, dec, night.RADeg, night.DecDeg))
	return x - j, at - y
}

// frameOf is the recipe's word for a frame.
func frameOf(f product.SpectralFrame) string {
	if f.Name == product.Barycentric {
		return frameBarycentric
	}
	return frameObservatory
}

// shiftOnto gives the cube the pixels of another one.
func (r *reduction) shiftOnto(night, onto product.Schema) {
	x, y := ontoShift(night, onto, 0, 0)
	shift := r.moved()
	for l := range shift.Elements {
		shift.Elements[l] += x
		shift.Rows[l] += y
	}
	shift.Onto = &[2]float64{x, y}
	frame, object := r.schema.Frame, r.schema.Object
	r.schema = onto
	r.schema.Frame, r.schema.Object = frame, object
}

// shiftField has the rectifier apply the shift.
func (r *reduction) shiftField() error {
	if r.shift == nil {
		return nil
	}
	trace := make([]float64, r.camera.Columns)
	for x := range trace {
		trace[x] = r.optics.geometry.TraceShift(float64(x))
	}
	f, err := calib.NewShiftField(trace, r.shift.Elements, r.shift.Rows, r.seq.N(), r.camera.Rows)
	if err == nil {
		r.rectifier.shiftBy(f)
	}
	return err
}

// finishShift writes the table of the shift.
func (r *reduction) finishShift() error {
	if r.shift == nil {
		return nil
	}
	table, err := r.shift.Table()
	if err != nil {
		return err
	}
	return r.cube.AppendTable(table)
}
