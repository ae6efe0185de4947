package rehearse

import (
	"math"
	"slices"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
)

// emitter is one source of a light.
type emitter struct {
	image image
	// band is the continuum of the whole source; nil for none.
	band *band
	// lines are the source's lines, of the whole source.
	lines []emission
	// motion shifts the lines; nil where they stand as observed.
	motion *motion
	// sight is the air before it; nil for none.
	sight *sightline
}

// emission is a line.
type emission struct {
	nm      float64 // vacuum wavelength at rest
	photons float64 // per second and m^2 of the whole source
	fwhmKmS float64
}

// motion is a source's velocity field in km/s, by place on the sky in arcsec.
type motion struct {
	east, north, systemic, towardsEast, towardsNorth float64
}

func (m *motion) at(east, north float64) float64 {
	return m.systemic + (east-m.east)*m.towardsEast + (north-m.north)*m.towardsNorth
}

// light is what falls on the mirrors in a step.
type light struct {
	// objects are the sources, sky the sky's continuum and skyLines its lines; a
	// lamp is an object.
	objects, sky, skyLines []emitter
	// allSky is sky and skyLines together.
	allSky []emitter
	// efficiency turns photons per m^2 into detected electrons, by vacuum nm.
	efficiency func(nm float64) float64
	// view is that of the objects.
	view viewing
}

// skyEfficiency is the collecting area, m^2, times what of the photons becomes
// electrons.
func skyEfficiency(p *instrument.Profile) func(nm float64) float64 {
	area := p.CollectingAreaM2()
	return func(nm float64) float64 { return area * p.Throughput(nm) }
}

// viewing is how a step sees the sky: the seeing and where guiding put the
// field, arc seconds along u and w.
type viewing struct {
	seeing, du, dw float64
	// sight is the air; nil for none.
	sight *sightline
}

// sameImage tells whether sources fall on the same mirrors, air aside.
func (v viewing) sameImage(w viewing) bool {
	return v.seeing == w.seeing && v.du == w.du && v.dw == w.dw
}

// viewed is the sky's light as another step sees it: sources fall on other
// mirrors and through other air, their spectra above it are the same.
func (o *optics) viewed(l *light, s *Scene, v viewing) *light {
	other := *l
	other.objects = make([]emitter, len(l.objects))
	for i := range l.objects {
		source := &s.Sources[i]
		other.objects[i] = l.objects[i]
		other.objects[i].sight = v.sight
		if v.sameImage(l.view) {
			continue
		}
		other.objects[i].image = o.field.imageOf(source, v.seeing, v.du, v.dw)
		other.objects[i].motion = o.newMotion(source, v)
	}
	return &other
}

// newSkyLight builds the scene's light through a geometry.
func (o *optics) newSkyLight(s *Scene, v viewing) *light {
	l := &light{efficiency: skyEfficiency(o.profile), view: v}
	for i := range s.Sources {
		l.objects = append(l.objects, o.newObject(s, &s.Sources[i], v, l.efficiency))
	}
	perMirror := uniformImage(o.field.arcsecPerMirror * o.field.arcsecPerMirror)
	if s.Sky.ContinuumABArcsec2 != nil {
		mag := *s.Sky.ContinuumABArcsec2
		l.sky = []emitter{{image: perMirror, band: o.newBand(func(nm float64) float64 { return physics.ABPhotons(mag, nm) }, l.efficiency)}}
	}
	var lines []emission
	for _, line := range s.Sky.Lines {
		lines = append(lines, emission{nm: line.WavelengthNM, photons: physics.LinePhotons(line.FluxWM2Arcsec2, line.WavelengthNM), fwhmKmS: line.FWHMKmS})
	}
	if len(lines) > 0 {
		l.skyLines = []emitter{{image: perMirror, lines: lines}}
	}
	l.allSky = slices.Concat(l.sky, l.skyLines)
	return l
}

func (o *optics) newObject(s *Scene, source *Source, v viewing, efficiency func(float64) float64) emitter {
	e := emitter{image: o.field.imageOf(source, v.seeing, v.du, v.dw), sight: v.sight}
	if source.ABMag != nil {
		e.band = o.newBand(photons(s, source), efficiency)
	}
	for _, line := range source.Lines {
		// The flux is as observed: the photons are those of the shifted line.
		seen := line.WavelengthNM * physics.DopplerFactor(source.Velocity.SystemicKmS)
		e.lines = append(e.lines, emission{nm: line.WavelengthNM, photons: physics.LinePhotons(line.FluxWM2, seen), fwhmKmS: line.FWHMKmS})
	}
	e.motion = o.newMotion(source, v)
	return e
}

// newMotion is a source's velocity field on the mirrors; nil for none. A mirror
// looks at the field minus what guiding moved it.
func (o *optics) newMotion(source *Source, v viewing) *motion {
	if source.Velocity == (Velocity{}) {
		return nil
	}
	sin, cos := math.Sincos(source.Velocity.PADeg * math.Pi / 180)
	gradient := source.Velocity.GradientKmSArcsec
	east, north := o.field.sky(v.du, v.dw)
	return &motion{
		east: source.EastArcsec + east, north: source.NorthArcsec + north,
		systemic: source.Velocity.SystemicKmS, towardsEast: gradient * sin, towardsNorth: gradient * cos,
	}
}

// newBand tabulates photons times efficiency over all that mirrors of the
// device can send to the detector.
func (o *optics) newBand(photons, efficiency func(nm float64) float64) *band {
	return o.geometry.newBand(func(nm float64) float64 {
		if e := efficiency(nm); e > 0 {
			return e * photons(nm)
		}
		return 0
	}, o.pxFrom, o.pxTo)
}
