package forecast

import (
	"math"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
)

// piece is light with one image: a source's, that of the sky, or of those wavelengths of a
// source that refraction leaves together.
type piece struct {
	// source is the index in the scene, -1 for the sky.
	source int
	// image is nil for the sky, which gives every mirror flat.
	image image
	flat  float64
	// column and row are the image's middle on the device.
	column, row float64
	// still is all light that does not move, its lines too; continuum is that without
	// lines; leaked is all of it as closed mirrors leak it.
	still, continuum, leaked *table
	// lines are all lines; they move if motion is there.
	lines  []line
	motion *motion
	// parts[w] are those of mirrors (u, w) by u from the device's first.
	parts map[int][]float64
}

// share is the part of a piece that mirrors of each u, from uFirst, put on a trace row, all 0
// outside from <= u < to.
type share struct {
	part     []float64
	from, to int
}

// motion is a velocity field in km/s by place in the field, arc seconds along u and w.
type motion struct{ u, w, systemic, alongU, alongW float64 }

// newMotion is a source's; nil for none.
func (l *Light) newMotion(s *scene.Source) *motion {
	v := s.Velocity
	if v.SystemicKmS == 0 && v.GradientKmSArcsec == 0 {
		return nil
	}
	sin, cos := math.Sincos(v.PADeg * math.Pi / 180)
	m := &motion{systemic: v.SystemicKmS}
	m.u, m.w = l.fieldPlace(s.EastArcsec, s.NorthArcsec)
	alongU, alongW := l.fieldPlace(sin, cos) // the gradient's direction turns as places do
	m.alongU, m.alongW = v.GradientKmSArcsec*alongU, v.GradientKmSArcsec*alongW
	return m
}

func (m *motion) at(u, w float64) float64 {
	return m.systemic + (u-m.u)*m.alongU + (w-m.w)*m.alongW
}

// fieldPlace turns offsets on the sky into arc seconds along u and w: +w lies at the
// position angle ROTANG, +u a quarter turn from it, towards west at ROTANG 0 and parity 1.
func (l *Light) fieldPlace(east, north float64) (u, w float64) {
	sin, cos := math.Sincos(l.target.RotangDeg * math.Pi / 180)
	return float64(l.profile.DMD.Parity) * (north*sin - east*cos), east*sin + north*cos
}

// imageOf is the image of a source behind the seeing.
func (l *Light) imageOf(s *scene.Source) image {
	mirror := l.profile.DMD.ArcsecPerMirror
	sigma := l.scene.SeeingFWHMArcsec / fwhmPerSigma / mirror
	radius, width := s.RadiusArcsec/mirror, s.WidthArcsec/fwhmPerSigma/mirror
	switch s.Kind {
	case scene.KindGalaxy:
		across := math.Hypot(float64(l.profile.DMD.Columns), float64(l.profile.DMD.Rows))
		return newProfileImage(func(r float64) float64 { return math.Exp(-r / radius) }, min(25*radius, 2*across), sigma, radius)
	case scene.KindRing:
		return newProfileImage(func(r float64) float64 { d := (r - radius) / width; return math.Exp(-0.5 * d * d) }, radius+8*width, sigma, width)
	}
	return roundImage{math.Hypot(sigma, width)}
}

// photonsOf is a source's continuum above the air, photons a second, m^2 and nm; nil for none.
func (l *Light) photonsOf(s *scene.Source) func(nm float64) float64 {
	if s.ABMag == nil {
		return nil
	}
	at := physics.ABPhotons(*s.ABMag, s.AtNM)
	switch {
	case s.TemperatureK > 0:
		scale := at / physics.PlanckPhotons(s.AtNM, s.TemperatureK)
		return func(nm float64) float64 { return scale * physics.PlanckPhotons(nm, s.TemperatureK) }
	case s.SpectrumCSV != "":
		energy := l.scene.Spectrum(s.SpectrumCSV)
		scale := at / (energy.At(s.AtNM) * s.AtNM) // photons go as energy times wavelength
		return func(nm float64) float64 { return scale * energy.At(nm) * nm }
	}
	// The same AB magnitude everywhere: photons per nm go as 1/wavelength.
	return func(nm float64) float64 { return at * s.AtNM / nm }
}

// emission is a line above the air.
type emission struct{ nm, photons, fwhmKmS float64 }

// dispersed is the distance px of a wavelength, slope its derivative, px/nm.
func dispersed(s *instrument.Spectrograph, nm float64) (px, slope float64) {
	d, x := s.DispersionPxPerNM, nm-s.CenterNM
	return x * (d[0] + x*(d[1]+x*d[2])), d[0] + x*(2*d[1]+x*3*d[2])
}

// passband is where the instrument lets light through, vacuum nm.
func passband(p *instrument.Profile) (from, to float64) {
	a, b := p.Telescope.Throughput, p.Spectrograph.Throughput
	return max(a[0].WavelengthNM, b[0].WavelengthNM), min(a[len(a)-1].WavelengthNM, b[len(b)-1].WavelengthNM)
}

// spectrum fills in what a piece's light does on the detector. through is what becomes of a
// photon (collecting area in m^2 included), part the part of each wavelength that is the
// piece's.
func (l *Light) spectrum(p *piece, photons func(nm float64) float64, lines []emission, through, part func(nm float64) float64) {
	s := &l.profile.Spectrograph
	sigma := s.LSFFWHMPx / fwhmPerSigma
	from, to := passband(l.profile)
	a, b := l.pxRange(from, to)
	p.still, p.continuum, p.leaked = newTable(a, b, s.UStepPx), newTable(a, b, s.UStepPx), newTable(a, b, s.UStepPx)
	put := func(nm, px, electrons float64, moves bool) {
		if !moves {
			p.still.put(px, electrons)
		}
		p.leaked.put(px, electrons/l.profile.DMD.Contrast.At(nm))
	}
	if photons != nil {
		const finePx = 0.04 // a third of the table's steps
		_, slope := dispersed(s, s.CenterNM)
		n := int(math.Ceil((to - from) * math.Abs(slope) / finePx))
		step := (to - from) / float64(n)
		for i := range n {
			nm := from + (float64(i)+0.5)*step
			px, _ := dispersed(s, nm)
			if electrons := photons(nm) * through(nm) * part(nm) * step; electrons > 0 {
				put(nm, px, electrons, false)
				p.continuum.put(px, electrons)
			}
		}
	}
	for _, e := range lines {
		nm := e.nm
		if p.motion != nil {
			nm *= physics.DopplerFactor(p.motion.systemic)
		}
		electrons := e.photons * through(nm) * part(nm)
		if !(electrons > 0) {
			continue
		}
		px, slope := dispersed(s, nm)
		perKmS := nm / (physics.LightSpeed_m_s / 1000) * slope
		own := e.fwhmKmS / fwhmPerSigma * perKmS
		at := line{nm: nm, px: px, sigma: math.Hypot(sigma, own), electrons: electrons, perKmS: perKmS}
		if p.motion == nil {
			// An unmoved line goes into the table as seven points that spread as it does.
			for k, node := range hermiteNodes {
				put(nm, px+node*own, electrons*hermiteWeights[k], false)
			}
		} else {
			put(nm, px, electrons, true)
		}
		at.shape()
		p.lines = append(p.lines, at)
	}
	p.still.finish(sigma)
	p.continuum.finish(sigma)
	p.leaked.finish(sigma)
}

// Nodes and weights of Gauss and Hermite's rule of 5 points for the unit normal (Abramowitz
// & Stegun, table 25.10, nodes times sqrt 2, weights over sqrt pi).
var (
	hermiteNodes   = [5]float64{-2.8569700138728056, -1.3556261799742659, 0, 1.3556261799742659, 2.8569700138728056}
	hermiteWeights = [5]float64{0.011257411327720691, 0.2220759220056126, 0.5333333333333333, 0.2220759220056126, 0.011257411327720691}
)

// pxRange is where light of wavelengths from..to lies, with room for its spread.
func (l *Light) pxRange(from, to float64) (a, b float64) {
	a, b = math.Inf(1), math.Inf(-1)
	const samples = 64
	for i := range samples + 1 {
		px, _ := dispersed(&l.profile.Spectrograph, from+(to-from)*float64(i)/samples)
		a, b = min(a, px), max(b, px)
	}
	margin := 6*l.profile.Spectrograph.LSFFWHMPx/fwhmPerSigma + 3
	return a - margin, b + margin
}
