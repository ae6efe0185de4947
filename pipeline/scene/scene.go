// Package scene is the sky as a file declares it: sources, the light of the sky itself,
// the seeing and the air. The rehearsal draws it and the forecast reckons with it, each
// by itself: they share what is written here, and no light.
package scene

import (
	"fmt"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
)

// The kinds of sources.
const (
	// KindStar is a point.
	KindStar = "star"
	// KindGaussian is a round Gaussian of full width at half maximum width_arcsec.
	KindGaussian = "gaussian"
	// KindRing has the brightness exp(-(r - radius)^2/2s^2), s that of a Gaussian
	// of full width at half maximum width_arcsec.
	KindRing = "ring"
	// KindGalaxy is a smooth round exponential disc, exp(-r/radius).
	KindGalaxy = "galaxy"
)

// Scene is what lies on the sky: the keys of a scene file. The light of sources is that
// above the atmosphere.
type Scene struct {
	// SeeingFWHMArcsec is the full width at half maximum of the seeing, a
	// circular Gaussian, the same at all wavelengths.
	SeeingFWHMArcsec float64  `yaml:"seeing_fwhm_arcsec"`
	Sources          []Source `yaml:"sources" config:"optional"`
	Sky              Sky      `yaml:"sky" config:"optional"`
	// Atmosphere dims and moves the sources; nil for a telescope above the air.
	Atmosphere *Atmosphere `yaml:"atmosphere" config:"optional"`
	// RefStar is what refstar steps see; nil in a scene without.
	RefStar *RefStar `yaml:"refstar" config:"optional"`

	files map[string][]byte
	// spectra are the tables of the CSV files, by name.
	spectra map[string]Spectrum
}

// Source is one source on the sky. Its brightness is the whole source's, before
// the seeing spreads it.
type Source struct {
	// Kind is KindStar, KindGaussian, KindRing or KindGalaxy.
	Kind string `yaml:"kind"`
	// EastArcsec and NorthArcsec are offsets from the target's position in the
	// plane of the sky that touches the sphere there.
	EastArcsec  float64 `yaml:"east_arcsec"`
	NorthArcsec float64 `yaml:"north_arcsec"`
	// RadiusArcsec is a ring's radius or a galaxy's scale length.
	RadiusArcsec float64 `yaml:"radius_arcsec" config:"optional"`
	// WidthArcsec is the full width at half maximum of a Gaussian or of a ring's
	// rim.
	WidthArcsec float64 `yaml:"width_arcsec" config:"optional"`
	// ABMag is the total AB magnitude of the continuum at AtNM; nil for a source
	// of lines only.
	ABMag *float64 `yaml:"ab_mag" config:"optional"`
	// AtNM is a vacuum wavelength, nm.
	AtNM float64 `yaml:"at_nm" config:"optional"`
	// TemperatureK makes the continuum a black body's.
	TemperatureK float64 `yaml:"temperature_k" config:"optional"`
	// SpectrumCSV names a file beside the scene with the continuum's shape (see
	// parseSpectrum). Without it and a temperature the continuum has the same AB
	// magnitude at all wavelengths.
	SpectrumCSV string   `yaml:"spectrum_csv" config:"optional"`
	Lines       []Line   `yaml:"lines" config:"optional"`
	Velocity    Velocity `yaml:"velocity" config:"optional"`
}

// Line is an emission line of a source.
type Line struct {
	// WavelengthNM is the vacuum wavelength at rest, nm.
	WavelengthNM float64 `yaml:"wavelength_nm"`
	// FluxWM2 is the whole source's flux in the line, W m-2.
	FluxWM2 float64 `yaml:"flux_w_m2"`
	// FWHMKmS is the full width at half maximum of the line's own Gaussian
	// profile, km/s; 0 for a line that only the instrument widens.
	FWHMKmS float64 `yaml:"fwhm_km_s" config:"optional"`
}

// Velocity shifts a source's lines, not its continuum. The velocity of a mirror
// is that of the sky at its centre: the seeing spreads the light of a source
// but does not mix its velocities.
type Velocity struct {
	// SystemicKmS is the radial velocity at the source's centre, km/s.
	SystemicKmS float64 `yaml:"systemic_km_s"`
	// GradientKmSArcsec is the change of the velocity towards PADeg, km/s per
	// arc second.
	GradientKmSArcsec float64 `yaml:"gradient_km_s_arcsec" config:"optional"`
	// PADeg is a position angle, north through east, degrees.
	PADeg float64 `yaml:"pa_deg" config:"optional"`
}

// Sky is the light that every mirror sees alike.
type Sky struct {
	// ContinuumABArcsec2 is the AB magnitude of a square arc second, the same at
	// all wavelengths; nil for none.
	ContinuumABArcsec2 *float64  `yaml:"continuum_ab_arcsec2" config:"optional"`
	Lines              []SkyLine `yaml:"lines" config:"optional"`
}

// SkyLine is an emission line of the sky.
type SkyLine struct {
	// WavelengthNM is the vacuum wavelength, nm.
	WavelengthNM float64 `yaml:"wavelength_nm"`
	// FluxWM2Arcsec2 is the flux of a square arc second, W m-2 arcsec-2.
	FluxWM2Arcsec2 float64 `yaml:"flux_w_m2_arcsec2"`
	// FWHMKmS is as in Line.
	FWHMKmS float64 `yaml:"fwhm_km_s" config:"optional"`
}

// Names lists the embedded scenes.
func Names() []string { return configs.Names(configs.Scenes) }

// Load reads the scene of a file, or the embedded one of that name, with
// the CSV files that it names. Errors are *config.Error with file, line and key
// path, or say which file could not be read.
func Load(pathOrName string) (*Scene, error) {
	source, err := config.Find(configs.Scenes, pathOrName)
	if err != nil {
		return nil, fmt.Errorf("scene %w", err)
	}
	return Parse(source.Name, source.Data, source.Beside)
}

// Parse reads a scene from text; name is what errors call the file, and
// beside reads a file that the scene names (nil when it may name none).
func Parse(name string, data []byte, beside func(file string) ([]byte, error)) (*Scene, error) {
	doc, err := config.Parse(name, data)
	if err != nil {
		return nil, err
	}
	s := new(Scene)
	if err := doc.Decode(s); err != nil {
		return nil, err
	}
	if err := s.check(doc); err != nil {
		return nil, err
	}
	if err := s.ReadSpectra(doc, "", beside); err != nil {
		return nil, err
	}
	return s, nil
}

// YAML is the scene as resolved; with the files of Files beside it, it reads
// back as an equal scene.
func (s *Scene) YAML() ([]byte, error) { return config.Encode(s) }

// Files returns the CSV files that the scene names, by name; not to be changed.
func (s *Scene) Files() map[string][]byte { return s.files }
