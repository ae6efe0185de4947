package scene

import (
	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
)

// Atmosphere is the air above the telescope in a scene: what it truly did that night,
// whatever the profile says of the site. It treats the light of sources, not the sky's,
// whose brightness is that seen from the ground.
type Atmosphere struct {
	// PressureHPa, TemperatureC and WaterHPa (the partial pressure of water vapour)
	// bend the light. Each optional; the profile's.
	PressureHPa  *float64 `yaml:"pressure_hpa" config:"optional"`
	TemperatureC *float64 `yaml:"temperature_c" config:"optional"`
	WaterHPa     *float64 `yaml:"water_hpa" config:"optional"`
	// GuideNM is the vacuum wavelength at which the telescope is guided, nm: that
	// light stands where it would without air. Optional; the profile's center_nm.
	GuideNM *float64 `yaml:"guide_nm" config:"optional"`
	// Extinction is what the air takes, 10^(-0.4 k X) left of the light at an air
	// mass X; beyond the table's ends k is that of the end. Optional; nothing.
	Extinction instrument.Extinction `yaml:"extinction" config:"optional"`
	// Refraction moves each wavelength by its refraction less that of GuideNM,
	// towards the zenith. Optional; false.
	Refraction bool `yaml:"refraction" config:"optional"`
}

func (a *Atmosphere) check(c *config.Checks, path string) {
	instrument.CheckAir(c, path, a.PressureHPa, a.TemperatureC, a.WaterHPa, a.Extinction)
	if a.GuideNM != nil {
		c.Within(path+".guide_nm", *a.GuideNM, LeastRefractedNM, maxNM)
	}
}

// RefStar is the star that refstar steps see, with the scene's sky around it.
type RefStar struct {
	// ABMag is the AB magnitude of the continuum at AtNM, above the atmosphere.
	ABMag float64 `yaml:"ab_mag"`
	// AtNM, TemperatureK and SpectrumCSV are as in Source.
	AtNM         float64 `yaml:"at_nm"`
	TemperatureK float64 `yaml:"temperature_k" config:"optional"`
	SpectrumCSV  string  `yaml:"spectrum_csv" config:"optional"`
	// EastArcsec and NorthArcsec say how far the star stands from where the telescope
	// should have put it, the middle of the wide element. Optional; 0.
	EastArcsec  float64 `yaml:"east_arcsec" config:"optional"`
	NorthArcsec float64 `yaml:"north_arcsec" config:"optional"`
	// SeeingFWHMArcsec is the seeing in its frames. Optional; the scene's.
	SeeingFWHMArcsec *float64 `yaml:"seeing_fwhm_arcsec" config:"optional"`
}

// Source is the star as a source of a scene.
func (r *RefStar) Source() Source {
	return Source{
		Kind: KindStar, EastArcsec: r.EastArcsec, NorthArcsec: r.NorthArcsec,
		ABMag: &r.ABMag, AtNM: r.AtNM, TemperatureK: r.TemperatureK, SpectrumCSV: r.SpectrumCSV,
	}
}

func (r *RefStar) check(c *config.Checks, path string) {
	source := r.Source()
	source.check(c, path)
	if r.SeeingFWHMArcsec != nil {
		c.Positive(path+".seeing_fwhm_arcsec", *r.SeeingFWHMArcsec)
		c.Within(path+".seeing_fwhm_arcsec", *r.SeeingFWHMArcsec, 0, maxArcsec)
	}
}

// StarScene is what refstar steps see: the star in the middle of its wide element, which
// lies dEast and dNorth arc seconds from the field's centre, and the scene's sky.
func (s *Scene) StarScene(dEast, dNorth float64) *Scene {
	star := s.RefStar.Source()
	star.EastArcsec += dEast
	star.NorthArcsec += dNorth
	t := &Scene{SeeingFWHMArcsec: s.SeeingFWHMArcsec, Sources: []Source{star}, Sky: s.Sky, Atmosphere: s.Atmosphere, spectra: s.spectra}
	if s.RefStar.SeeingFWHMArcsec != nil {
		t.SeeingFWHMArcsec = *s.RefStar.SeeingFWHMArcsec
	}
	return t
}

// LeastRefractedNM is the least wavelength at which air bends light by the formula in
// use; none shorter reaches the ground.
const LeastRefractedNM = 200

// placedSource is a source and its key path.
type placedSource struct {
	path   string
	source Source
}

// allSources are the scene's sources and its reference star.
func (s *Scene) allSources() []placedSource {
	var list []placedSource
	for i, source := range s.Sources {
		list = append(list, placedSource{sourcePath(i), source})
	}
	if s.RefStar != nil {
		list = append(list, placedSource{"refstar", s.RefStar.Source()})
	}
	return list
}

// Over is the air of the night: what the scene says, and the site's for the rest.
func (a *Atmosphere) Over(site instrument.Site) physics.Atmosphere {
	return instrument.WithAir(site.Atmosphere(), a.PressureHPa, a.TemperatureC, a.WaterHPa)
}
