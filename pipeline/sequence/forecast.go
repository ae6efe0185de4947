package sequence

import (
	"fmt"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/scene"
)

// Forecast is what the observer expects to see and wants of it. It changes no exposure of
// a sequence whose code and dwell are given.
type Forecast struct {
	// SeeingFWHMArcsec, Sources, Sky and Atmosphere are a scene's.
	SeeingFWHMArcsec float64           `yaml:"seeing_fwhm_arcsec" config:"optional"`
	Sources          []scene.Source    `yaml:"sources" config:"optional"`
	Sky              scene.Sky         `yaml:"sky" config:"optional"`
	Atmosphere       *scene.Atmosphere `yaml:"atmosphere" config:"optional"`
	// Wanted are the measurements that the night is for.
	Wanted []Wanted `yaml:"wanted" config:"optional"`
	// Aim is what a choice of code raises: AimFaintest, AimMean, or the name of one of
	// Wanted.
	Aim string `yaml:"aim" config:"optional"`
	// ThroughputRMS is the scatter of the frames' transmission, rms of 1, that nothing
	// corrects. Optional; 0.
	ThroughputRMS float64 `yaml:"throughput_rms" config:"optional"`
	Limits        Limits  `yaml:"limits" config:"optional"`
}

// The aims that are no name.
const (
	// AimFaintest is the S/N of the one of Wanted that has the least.
	AimFaintest = "faintest"
	// AimMean is the mean S/N of Wanted.
	AimMean = "mean"
)

// DefaultSeeingArcsec is the seeing of a forecast that does not say its own.
const DefaultSeeingArcsec = 1

// SetDefaults sets what absent keys mean.
func (f *Forecast) SetDefaults() { f.SeeingFWHMArcsec, f.Aim = DefaultSeeingArcsec, AimFaintest }

// Wanted is a measurement: the light of a source, or of a place in the field, in a line or
// a band of wavelengths.
type Wanted struct {
	Name string `yaml:"name"`
	// Source is the index of one of the forecast's sources, whose light alone is meant, or
	// nil for a place, where that of all sources is.
	Source *int `yaml:"source" config:"optional"`
	// EastArcsec and NorthArcsec are the place, the middle of a circle.
	EastArcsec  *float64 `yaml:"east_arcsec" config:"optional"`
	NorthArcsec *float64 `yaml:"north_arcsec" config:"optional"`
	// RadiusArcsec is the circle's radius; nil for one that fits the source.
	RadiusArcsec *float64 `yaml:"radius_arcsec" config:"optional"`
	// LineNM is the vacuum wavelength of a line as observed; BandNM the ends of a band,
	// vacuum nm. One of the two is given.
	LineNM *float64  `yaml:"line_nm" config:"optional"`
	BandNM []float64 `yaml:"band_nm,flow" config:"optional"`
}

// Limits bound what may be chosen; 0 for no limit.
type Limits struct {
	// TotalSeconds is for all exposures, calibrations and reading included.
	TotalSeconds float64 `yaml:"total_s" config:"optional"`
	// LostFrames is how many science frames a cycle may lose and be whole.
	LostFrames int `yaml:"lost_frames" config:"optional"`
	// CosmicPer1000 is how many of 1000 samples cosmic rays strike.
	CosmicPer1000 float64 `yaml:"cosmic_per_1000" config:"optional"`
	// CycleSeconds is how long a cycle may take, for what changes in a night and is no
	// factor per frame.
	CycleSeconds float64 `yaml:"cycle_s" config:"optional"`
	// FlexurePxPerHour is how fast the image drifts on the detector, pixels an hour.
	FlexurePxPerHour float64 `yaml:"flexure_px_h" config:"optional"`
	// SeeingChangePerHour and SkyChangePerHour are by what part the seeing's width and the
	// sky's lines change in an hour, rms.
	SeeingChangePerHour float64 `yaml:"seeing_change_per_h" config:"optional"`
	SkyChangePerHour    float64 `yaml:"sky_change_per_h" config:"optional"`
}

// Scene is the sky of the forecast; it shares its slices. The spectra that sources name are
// with it if the target was read from a file.
func (t *Target) Scene() *scene.Scene {
	f := t.Forecast
	if f == nil {
		return nil
	}
	s := &scene.Scene{SeeingFWHMArcsec: f.SeeingFWHMArcsec, Sources: f.Sources, Sky: f.Sky, Atmosphere: f.Atmosphere}
	s.ShareSpectra(t.sky)
	return s
}

// Files returns the CSV files that the forecast names, by name; not to be changed.
func (t *Target) Files() map[string][]byte {
	if t.sky == nil {
		return nil
	}
	return t.sky.Files()
}

// readSpectra reads the CSV files that the forecast's sources name.
func (t *Target) readSpectra(doc *config.Doc, beside func(file string) ([]byte, error)) error {
	if t.Forecast == nil {
		return nil
	}
	sky := t.Scene()
	if err := sky.ReadSpectra(doc, "forecast.", beside); err != nil {
		return err
	}
	t.sky = sky
	return nil
}

const (
	maxWanted = 1000
	// mostChangePerHour, pixels or parts, is far above what any night is used for.
	mostChangePerHour = 1000
)

func (t *Target) checkForecast(c *config.Checks) {
	f := t.Forecast
	if f == nil {
		return
	}
	t.Scene().CheckIn(c, "forecast.")
	c.That(len(f.Wanted) <= maxWanted, "forecast.wanted", "%d measurements are too many; give at most %d", len(f.Wanted), maxWanted)
	names := []string{AimFaintest, AimMean}
	for i := range f.Wanted {
		path := fmt.Sprintf("forecast.wanted[%d]", i)
		f.Wanted[i].check(c, path, len(f.Sources))
		for _, name := range names {
			c.That(f.Wanted[i].Name != name, path+".name", "%q is taken; give another", name)
		}
		names = append(names, f.Wanted[i].Name)
	}
	c.OneOf("forecast.aim", f.Aim, names...)
	c.Within("forecast.throughput_rms", f.ThroughputRMS, 0, 1)
	c.NotNegative("forecast.limits.total_s", f.Limits.TotalSeconds)
	c.Count("forecast.limits.lost_frames", f.Limits.LostFrames, 0, maxV)
	c.Within("forecast.limits.cosmic_per_1000", f.Limits.CosmicPer1000, 0, 1000)
	c.NotNegative("forecast.limits.cycle_s", f.Limits.CycleSeconds)
	c.Within("forecast.limits.flexure_px_h", f.Limits.FlexurePxPerHour, 0, mostChangePerHour)
	c.Within("forecast.limits.seeing_change_per_h", f.Limits.SeeingChangePerHour, 0, mostChangePerHour)
	c.Within("forecast.limits.sky_change_per_h", f.Limits.SkyChangePerHour, 0, mostChangePerHour)
}

// Limits of a measurement.
const (
	maxFieldArcsec = 1e5
	leastNM        = 100
	mostNM         = 1e5
)

func (w *Wanted) check(c *config.Checks, path string, sources int) {
	c.That(printable(w.Name, maxNameBytes), path+".name", "%q is no name; write 1 to %d printable ASCII characters", w.Name, maxNameBytes)
	if w.Source != nil {
		c.That(sources > 0, path+".source", "the forecast has no sources; list them, or give a place")
		c.Count(path+".source", *w.Source, 0, max(sources-1, 0))
		c.That(w.EastArcsec == nil, path+".east_arcsec", "the source has its own place; leave the key out")
		c.That(w.NorthArcsec == nil, path+".north_arcsec", "the source has its own place; leave the key out")
	} else {
		c.That(w.EastArcsec != nil && w.NorthArcsec != nil, path, "neither a source nor a place is given; write source, or east_arcsec, north_arcsec and radius_arcsec")
		c.That(w.RadiusArcsec != nil, path+".radius_arcsec", "the key is missing; add it")
	}
	for _, at := range []struct {
		key   string
		value *float64
	}{{"east_arcsec", w.EastArcsec}, {"north_arcsec", w.NorthArcsec}} {
		if at.value != nil {
			c.Within(path+"."+at.key, *at.value, -maxFieldArcsec, maxFieldArcsec)
		}
	}
	if w.RadiusArcsec != nil {
		c.Positive(path+".radius_arcsec", *w.RadiusArcsec)
		c.Within(path+".radius_arcsec", *w.RadiusArcsec, 0, maxFieldArcsec)
	}
	if w.LineNM != nil {
		c.That(w.BandNM == nil, path+".band_nm", "line_nm is given already; leave one of the two out")
		c.Within(path+".line_nm", *w.LineNM, leastNM, mostNM)
		return
	}
	if !c.That(len(w.BandNM) == 2, path, "neither a line nor a band is given; write line_nm, or band_nm: [from, to]") {
		return
	}
	for _, nm := range w.BandNM {
		c.Within(path+".band_nm", nm, leastNM, mostNM)
	}
	c.That(w.BandNM[0] < w.BandNM[1], path+".band_nm", "%v does not lie below %v; exchange them", w.BandNM[0], w.BandNM[1])
}
