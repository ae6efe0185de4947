package scene

import (
	"fmt"

	"mirrorloom/pipeline/config"
)

// Bounds of a scene's values: wide enough for any sky, narrow enough that no
// product of them leaves float64.
const (
	maxArcsec   = 1e5
	maxKmS      = 1e5
	minNM       = 100
	maxNM       = 1e5
	maxFlux     = 1e3
	maxSources  = 1000
	maxLines    = 1000
	maxKelvin   = 1e7
	faintestMag = 60
)

// Validate checks a scene that was built in Go as Load checks one from a
// file. Such a scene cannot name CSV files.
func (s *Scene) Validate() error {
	if err := s.check(nil); err != nil {
		return err
	}
	return s.ReadSpectra(nil, "", nil)
}

// check finds the first value that makes no sense; doc gives the lines and may
// be nil.
func (s *Scene) check(doc *config.Doc) error {
	c := doc.Checks()
	s.CheckIn(c, "")
	return c.Err()
}

// CheckIn checks the values of a scene whose keys stand after prefix (empty, or a key path
// with a closing dot); the files that it names are not read.
func (s *Scene) CheckIn(c *config.Checks, prefix string) {
	c.Positive(prefix+"seeing_fwhm_arcsec", s.SeeingFWHMArcsec)
	c.Within(prefix+"seeing_fwhm_arcsec", s.SeeingFWHMArcsec, 0, maxArcsec)
	c.That(len(s.Sources) <= maxSources, prefix+"sources", "%d sources are too many; give at most %d", len(s.Sources), maxSources)
	for i := range s.Sources {
		s.Sources[i].check(c, prefix+sourcePath(i))
	}
	s.Sky.check(c, prefix+"sky")
	if s.Atmosphere != nil {
		s.Atmosphere.check(c, prefix+"atmosphere")
	}
	if s.RefStar != nil {
		s.RefStar.check(c, prefix+"refstar")
	}
}

// sourcePath is the key path of source i.
func sourcePath(i int) string { return fmt.Sprintf("sources[%d]", i) }

func (s *Source) check(c *config.Checks, path string) {
	c.OneOf(path+".kind", s.Kind, KindStar, KindGaussian, KindRing, KindGalaxy)
	c.Within(path+".east_arcsec", s.EastArcsec, -maxArcsec, maxArcsec)
	c.Within(path+".north_arcsec", s.NorthArcsec, -maxArcsec, maxArcsec)
	s.checkShape(c, path)
	s.checkContinuum(c, path)
	c.That(s.ABMag != nil || len(s.Lines) > 0, path, "the source has neither a continuum nor lines; give ab_mag or lines")
	c.That(len(s.Lines) <= maxLines, path+".lines", "%d lines are too many; give at most %d", len(s.Lines), maxLines)
	for i, l := range s.Lines {
		at := fmt.Sprintf("%s.lines[%d]", path, i)
		checkLine(c, at, l.WavelengthNM, l.FWHMKmS)
		c.Within(at+".flux_w_m2", l.FluxWM2, 0, maxFlux)
	}
	c.Within(path+".velocity.systemic_km_s", s.Velocity.SystemicKmS, -maxKmS, maxKmS)
	c.Within(path+".velocity.gradient_km_s_arcsec", s.Velocity.GradientKmSArcsec, -maxKmS, maxKmS)
	c.Within(path+".velocity.pa_deg", s.Velocity.PADeg, -360, 360)
}

// checkShape demands the sizes that a kind has and refuses the others.
func (s *Source) checkShape(c *config.Checks, path string) {
	size := func(key string, value float64, wanted bool) {
		if wanted {
			c.Positive(path+"."+key, value)
			c.Within(path+"."+key, value, 0, maxArcsec)
			return
		}
		c.That(value == 0, path+"."+key, "a %s has no such size; leave the key out", s.Kind)
	}
	size("radius_arcsec", s.RadiusArcsec, s.Kind == KindRing || s.Kind == KindGalaxy)
	size("width_arcsec", s.WidthArcsec, s.Kind == KindRing || s.Kind == KindGaussian)
}

func (s *Source) checkContinuum(c *config.Checks, path string) {
	if s.ABMag == nil {
		c.That(s.AtNM == 0, path+".at_nm", "there is no ab_mag that it belongs to; give ab_mag or leave it out")
		c.That(s.TemperatureK == 0, path+".temperature_k", "there is no ab_mag to scale it by; give ab_mag or leave it out")
		c.That(s.SpectrumCSV == "", path+".spectrum_csv", "there is no ab_mag to scale it by; give ab_mag or leave it out")
		return
	}
	c.Within(path+".ab_mag", *s.ABMag, -30, faintestMag)
	c.Within(path+".at_nm", s.AtNM, minNM, maxNM)
	c.That(s.TemperatureK == 0 || s.SpectrumCSV == "", path+".spectrum_csv", "temperature_k gives the continuum already; leave one of the two out")
	if s.TemperatureK != 0 {
		c.Within(path+".temperature_k", s.TemperatureK, 100, maxKelvin)
	}
}

func (s *Sky) check(c *config.Checks, path string) {
	if s.ContinuumABArcsec2 != nil {
		c.Within(path+".continuum_ab_arcsec2", *s.ContinuumABArcsec2, -30, faintestMag)
	}
	c.That(len(s.Lines) <= maxLines, path+".lines", "%d lines are too many; give at most %d", len(s.Lines), maxLines)
	for i, l := range s.Lines {
		at := fmt.Sprintf("%s.lines[%d]", path, i)
		checkLine(c, at, l.WavelengthNM, l.FWHMKmS)
		c.Within(at+".flux_w_m2_arcsec2", l.FluxWM2Arcsec2, 0, maxFlux)
	}
}

func checkLine(c *config.Checks, at string, wavelength, fwhm float64) {
	c.Within(at+".wavelength_nm", wavelength, minNM, maxNM)
	c.Within(at+".fwhm_km_s", fwhm, 0, maxKmS)
}

// Usable checks a scene again that a caller may have built or changed in Go;
// the spectra of its files must have been read.
func (s *Scene) Usable() error {
	if err := s.check(nil); err != nil {
		return err
	}
	for _, at := range s.allSources() {
		if name := at.source.SpectrumCSV; name != "" && s.spectra[name].NM == nil {
			return fmt.Errorf("%s.spectrum_csv: %s was not read; load the scene from its file", at.path, name)
		}
	}
	return nil
}
