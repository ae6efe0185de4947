package rehearse

import (
	"fmt"
	"math"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// air is what a scene's atmosphere does to light by its dispersed distance, tabulated
// at the points of all bands.
type air struct {
	optics     *optics
	atmosphere physics.Atmosphere
	guideNM    float64
	refracts   bool
	curve      physics.ExtinctionCurve
	// magnitudes[k] is the extinction, mag per unit of air mass, and bend[k] the
	// refraction where tan z is 1 less that of the guide's wavelength, arc seconds, at
	// the dispersed distance pxFrom + k bandStep.
	magnitudes, bend []float64
	// A source's image is looked up at few values of bend, its nodes: node i stands for
	// node0 + i nodeStep. places[k] says how bend[k] lies among them.
	nodes           int
	node0, nodeStep float64
	places          []nodePlace
}

// nodePlace interpolates between the nodes first..first+3.
type nodePlace struct {
	first  int
	weight [4]float64
}

// sightline is the air between a step and what it looks at.
type sightline struct {
	air *air
	// airmass and zenithDeg, the apparent zenith distance, are those of the middle of
	// the exposure, and parallacticDeg the zenith's position angle then.
	airmass, zenithDeg, parallacticDeg float64
	// tanZ is that of the zenith distance, 0 without refraction: light moves by tanZ
	// times bend towards the zenith.
	tanZ float64
	// east and north point to the zenith; column and row are how many mirrors of the
	// device an arc second towards it is.
	east, north, column, row float64
	// left[k] is the part of the light left at the points of air.bend.
	left []float64
}

// extinctionAt is a curve that goes on beyond its ends as it is there.
func extinctionAt(curve physics.ExtinctionCurve, nm float64) float64 {
	if len(curve) == 0 {
		return 0
	}
	return curve.At(min(max(nm, curve[0].VacuumNm), curve[len(curve)-1].VacuumNm))
}

// newAir tabulates a scene's atmosphere; nil for a scene without.
func (o *optics) newAir(s *Scene) *air {
	if s.Atmosphere == nil {
		return nil
	}
	a := &air{optics: o, guideNM: o.profile.Spectrograph.CenterNM, refracts: s.Atmosphere.Refraction, curve: s.Atmosphere.Extinction.Curve()}
	if s.Atmosphere.GuideNM != nil {
		a.guideNM = *s.Atmosphere.GuideNM
	}
	a.atmosphere = s.Atmosphere.Over(o.profile.Site)
	n := o.bandPoints()
	a.magnitudes, a.bend = make([]float64, n), make([]float64, n)
	low, high := math.Inf(1), math.Inf(-1)
	for k := range n {
		nm, ok := o.geometry.wavelength(o.pxFrom + float64(k)*bandStep)
		if !ok {
			nm = a.guideNM // no light comes here
		}
		a.magnitudes[k] = extinctionAt(a.curve, nm)
		a.bend[k] = a.bendAt(nm)
		if ok && o.profile.Throughput(nm) > 0 {
			low, high = min(low, a.bend[k]), max(high, a.bend[k])
		}
	}
	if low > high { // no light at all
		low, high = 0, 0
	}
	// Beyond the wavelengths that pass there is no light to be moved, but for parts of a
	// point at the ends.
	for k := range a.bend {
		a.bend[k] = min(max(a.bend[k], low-bendMargin), high+bendMargin)
	}
	return a
}

// bendMargin is more than the refraction changes from one band point to the next.
const bendMargin = 0.05

// bendAt is the refraction at a vacuum wavelength where tan z is 1, less that of the
// guide's, arc seconds.
func (a *air) bendAt(nm float64) float64 {
	return a.atmosphere.DifferentialRefraction(max(nm, scene.LeastRefractedNM), a.guideNM, 45)
}

// nodesPerSigma is how close nodes lie: the cubic through four of them errs by less
// than 5e-7 of a Gaussian's peak.
const nodesPerSigma = 20

// mostNodes bounds the work for a seeing that is far narrower than the refraction.
const mostNodes = 4000

// placeNodes lays out the nodes for images as narrow as a seeing (full width at half
// maximum, arc seconds) moved by up to tanZ times bend.
func (a *air) placeNodes(seeing, tanZ float64) {
	low, high := math.Inf(1), math.Inf(-1)
	for _, b := range a.bend {
		low, high = min(low, b), max(high, b)
	}
	a.nodeStep = max(seeing/fwhmPerSigma/nodesPerSigma/max(tanZ, 1e-3), (high-low)/mostNodes)
	a.node0 = low - a.nodeStep
	a.nodes = int((high-low)/a.nodeStep) + 4
	a.places = make([]nodePlace, len(a.bend))
	for k, b := range a.bend {
		at := (b - a.node0) / a.nodeStep
		first := min(int(at)-1, a.nodes-4)
		t := at - float64(first) - 1
		a.places[k] = nodePlace{first, [4]float64{
			-t * (t - 1) * (t - 2) / 6, (t + 1) * (t - 1) * (t - 2) / 2, -(t + 1) * t * (t - 2) / 2, (t + 1) * t * (t - 1) / 6,
		}}
	}
}

// bandPoints is how many points a band over all dispersed distances has.
func (o *optics) bandPoints() int { return int(math.Ceil((o.pxTo-o.pxFrom)/bandStep)) + 2 }

// newSightline is the air that the middle of an exposure looks through; the error says
// that the place lies below the horizon.
func (a *air) newSightline(raDeg, decDeg float64, middle time.Time) (*sightline, error) {
	site := a.optics.profile.Site
	zenith := physics.ApparentZenithDistance(physics.ZenithDistance(raDeg, decDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg))
	l := &sightline{air: a, zenithDeg: zenith, airmass: physics.Airmass(zenith)}
	if math.IsNaN(l.airmass) || zenith >= 90 {
		return nil, fmt.Errorf("RA %.5g DEC %.5g lies below the horizon at %s; choose another start_utc, or a scene without atmosphere", raDeg, decDeg, middle.UTC().Format(time.RFC3339))
	}
	l.parallacticDeg = physics.TargetParallacticAngle(raDeg, decDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg)
	l.east, l.north = math.Sincos(l.parallacticDeg * math.Pi / 180)
	l.column, l.row = a.optics.field.mirrorsAlong(l.east, l.north)
	if a.refracts {
		l.tanZ = math.Tan(zenith * math.Pi / 180)
	}
	l.left = make([]float64, len(a.magnitudes))
	for k, m := range a.magnitudes {
		l.left[k] = physics.AirTransmission(m, l.airmass)
	}
	return l, nil
}

// meanSightline is what truth speaks of: the mean of what several steps let through,
// every wavelength in its place.
func (a *air) meanSightline(steps []*sightline) *sightline {
	l := &sightline{air: a, left: make([]float64, len(a.magnitudes))}
	for k := range l.left {
		for _, step := range steps {
			l.left[k] += step.left[k]
		}
		l.left[k] /= float64(len(steps))
	}
	return l
}

// at gives the part of the light left at a dispersed distance, and how many arc seconds
// it has moved towards the zenith.
func (l *sightline) at(px float64) (left, moved float64) {
	place := min(max((px-l.air.optics.pxFrom)/bandStep, 0), float64(len(l.left)-2))
	k := int(place)
	t := place - float64(k)
	read := func(list []float64) float64 { return list[k] + (list[k+1]-list[k])*t }
	return read(l.left), l.tanZ * read(l.air.bend)
}

// sightlines works out the air of every step that looks at the sky, and the mean over
// the science steps; nil for the others.
func (r *rehearsal) sightlines() (steps []*sightline, mean *sightline, err error) {
	steps = make([]*sightline, len(r.seq.Steps))
	starts, err := r.starts()
	if err != nil {
		return nil, nil, err
	}
	var science []*sightline
	for i, st := range r.seq.Steps {
		if !seesSky(st.Kind) && st.Kind != sequence.RefStar {
			continue
		}
		ra, dec := r.pointing(i)
		if steps[i], err = r.air.newSightline(ra, dec, middleOf(st, starts[i])); err != nil {
			return nil, nil, fmt.Errorf("step %d: %w", st.Step, err)
		}
		if st.Kind == sequence.Science {
			science = append(science, steps[i])
		}
	}
	if len(science) > 0 {
		mean = r.air.meanSightline(science)
	}
	return steps, mean, nil
}

// pointing is the ICRS place that a step looks at.
func (r *rehearsal) pointing(step int) (raDeg, decDeg float64) {
	t := r.seq.Target
	if star := t.Calibration.RefStar; star != nil && r.seq.Steps[step].Kind == sequence.RefStar {
		return star.RADeg, star.DecDeg
	}
	return t.RADeg, t.DecDeg
}

// middleOf is the middle of an exposure.
func middleOf(st sequence.Step, start time.Time) time.Time {
	return start.Add(time.Duration(st.ExptimeSeconds / 2 * float64(time.Second)))
}
