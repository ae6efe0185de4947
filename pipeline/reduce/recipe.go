package reduce

import (
	"crypto/sha256"
	"encoding/hex"
	"strings"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
)

// The values of `use` in a recipe.
const (
	useAuto = "auto"
	useOff  = "off"
)

// The values of grid.frame.
const (
	frameObservatory = "observatory"
	frameBarycentric = "barycentric"
)

// DefaultRecipe is the name of the embedded recipe that is followed when none
// is given.
const DefaultRecipe = "default"

// Recipe says which corrections a reduction makes. Every key may be left out;
// SetDefaults says what then holds.
type Recipe struct {
	Detector   DetectorRecipe `yaml:"detector" config:"optional"`
	Flat       StageRecipe    `yaml:"flat" config:"optional"`
	Arc        StageRecipe    `yaml:"arc" config:"optional"`
	Sky        SkyRecipe      `yaml:"sky" config:"optional"`
	Flux       FluxRecipe     `yaml:"flux" config:"optional"`
	Grid       GridRecipe     `yaml:"grid" config:"optional"`
	Throughput StageRecipe    `yaml:"throughput" config:"optional"`
	Repair     StageRecipe    `yaml:"repair" config:"optional"`
	Stars      StarsRecipe    `yaml:"stars" config:"optional"`

	// SHA is the lower-case hex SHA-256 of the recipe's text (RECSHA).
	SHA string `yaml:"-" config:"-"`
	// Name is where the text came from.
	Name string `yaml:"-" config:"-"`
}

// StageRecipe is a stage without options. The arc's `use` may also name the
// cube.fits of another run, whose geometry is then taken, and the throughput's a table
// of a monitor's fluxes, which then count with what the frames themselves tell.
type StageRecipe struct {
	Use string `yaml:"use"`
}

// DetectorRecipe rules bias, dark, all-off frames and bad pixels. With `use:
// off` only the overscan, or else the profile's bias level, is taken off.
type DetectorRecipe struct {
	Use string `yaml:"use"`
	// ClipSigma bounds the samples of a calibration stack around their median.
	ClipSigma float64 `yaml:"clip_sigma" config:"optional"`
	// HotSigma is the excess of a pixel in the dark, in standard errors, that
	// makes it a bad one.
	HotSigma float64 `yaml:"hot_sigma" config:"optional"`
	// DeadBelow is the response to the lamp, in that of its neighbours, below
	// which a pixel is a bad one.
	DeadBelow float64 `yaml:"dead_below" config:"optional"`
}

// GridRecipe is the cube's wavelength axis: the profile's unless first_nm, step_nm and
// count are given, nm on the grid's own scale.
type GridRecipe struct {
	Use     string  `yaml:"use"`
	FirstNM float64 `yaml:"first_nm" config:"optional"`
	StepNM  float64 `yaml:"step_nm" config:"optional"`
	Count   int     `yaml:"count" config:"optional"`
	// Axis and Spacing are those of instrument.Grid; they need a grid of the recipe's own.
	Axis    instrument.Axis    `yaml:"axis" config:"optional"`
	Spacing instrument.Spacing `yaml:"spacing" config:"optional"`
	// Frame is the standard of rest of the wavelengths: observatory, as observed, or
	// barycentric, of the solar system's barycentre. Unless given it is that of onto's cube,
	// or observatory.
	Frame string `yaml:"frame" config:"optional"`
	// Refraction auto takes out what the air's refraction does to the place of each
	// wavelength, off leaves it in. GuideNM is the vacuum wavelength at which the guider
	// holds the target; the profile's center_nm unless given.
	Refraction string  `yaml:"refraction" config:"optional"`
	GuideNM    float64 `yaml:"guide_nm" config:"optional"`
	// Onto names the cube.fits of another run whose voxels this cube is to have: its pixels
	// on the sky, its wavelengths and their frame.
	Onto string `yaml:"onto" config:"optional"`
}

// SetDefaults gives every stage its default.
func (r *Recipe) SetDefaults() {
	auto := StageRecipe{Use: useAuto}
	r.Flat, r.Arc, r.Throughput, r.Repair = auto, auto, auto, auto
	r.Sky, r.Flux = SkyRecipe{Use: useOff}, FluxRecipe{Use: useOff}
	r.Detector.SetDefaults()
	r.Stars.SetDefaults()
	r.Grid = GridRecipe{Use: useAuto, Refraction: useOff}
}

// SetDefaults gives the options their defaults.
func (d *DetectorRecipe) SetDefaults() {
	// 4 sigma cuts cosmic rays and costs 1e-3 of the variance of a clean stack;
	// 8 sigma picks no pixel by chance among 1e8; a pixel with less than half
	// its neighbours' response is broken rather than uneven.
	*d = DetectorRecipe{Use: useAuto, ClipSigma: 4, HotSigma: 8, DeadBelow: 0.5}
}

// LoadRecipe reads a recipe by the name of an embedded one or by path.
func LoadRecipe(pathOrName string) (*Recipe, error) {
	src, err := config.Find(configs.Recipes, pathOrName)
	if err != nil {
		return nil, err
	}
	return parseRecipe(src.Name, src.Data)
}

func parseRecipe(name string, data []byte) (*Recipe, error) {
	doc, err := config.Parse(name, data)
	if err != nil {
		return nil, err
	}
	r := new(Recipe)
	if err := doc.Decode(r); err != nil {
		return nil, err
	}
	if err := r.check(doc); err != nil {
		return nil, err
	}
	sum := sha256.Sum256(data)
	r.SHA, r.Name = hex.EncodeToString(sum[:]), name
	return r, nil
}

func (r *Recipe) check(doc *config.Doc) error {
	c := doc.Checks()
	c.OneOf("detector.use", r.Detector.Use, useAuto, useOff)
	c.Within("detector.clip_sigma", r.Detector.ClipSigma, 2, 100)
	c.Within("detector.hot_sigma", r.Detector.HotSigma, 4, 1000)
	c.Within("detector.dead_below", r.Detector.DeadBelow, 0, 1)
	c.That(r.Throughput.Use == useAuto || r.Throughput.Use == useOff || isTable(r.Throughput.Use), "throughput.use",
		"%q is unknown; use auto, off, or a monitor's table (.csv or .fits) with the columns step, flux, error", r.Throughput.Use)
	c.OneOf("repair.use", r.Repair.Use, useAuto, useOff)
	c.OneOf("flat.use", r.Flat.Use, useAuto, useOff)
	c.That(r.Arc.Use == useAuto || r.Arc.Use == useOff || strings.HasSuffix(r.Arc.Use, ".fits"), "arc.use",
		"%q is unknown; use auto, off, or the cube.fits of a run of the same instrument", r.Arc.Use)
	r.Stars.check(c)
	c.That(r.Stars.Use == useOff || r.Grid.Onto == "", "stars.use", "the cube's place is that of grid.onto, which stars would move again; leave one of them out")
	r.Sky.check(c)
	r.Flux.check(c)
	r.checkGrid(c)
	return c.Err()
}

func (r *Recipe) checkGrid(c *config.Checks) {
	c.OneOf("grid.use", r.Grid.Use, useAuto, useOff)
	if r.Grid.Frame != "" {
		c.OneOf("grid.frame", r.Grid.Frame, frameObservatory, frameBarycentric)
	}
	r.checkField(c)
	if r.ownGrid() {
		c.That(r.Grid.Use == useAuto, "grid.use", "off takes the profile's grid, so first_nm, step_nm and count have no effect; use auto or leave them out")
		c.Positive("grid.first_nm", r.Grid.FirstNM)
		c.Positive("grid.step_nm", r.Grid.StepNM)
		c.Count("grid.count", r.Grid.Count, 2, 1<<20)
		r.grid(nil).CheckScale(c)
		return
	}
	for _, k := range []struct {
		key   string
		other bool
	}{{"grid.axis", r.Grid.Axis != instrument.Vacuum}, {"grid.spacing", r.Grid.Spacing != instrument.Linear}} {
		c.That(!k.other, k.key, "the profile's grid has its own; give first_nm, step_nm and count as well")
	}
}

// checkField refuses contradictions among the keys that say where voxels lie on the sky.
func (r *Recipe) checkField(c *config.Checks) {
	g := r.Grid
	c.OneOf("grid.refraction", g.Refraction, useAuto, useOff)
	if g.GuideNM != 0 {
		c.Within("grid.guide_nm", g.GuideNM, 200, 1e5)
		c.That(g.Refraction == useAuto, "grid.guide_nm", "without refraction no wavelength is moved; add refraction: auto or leave guide_nm out")
	}
	if g.Onto != "" {
		c.That(strings.HasSuffix(g.Onto, ".fits"), "grid.onto", "%q is no cube.fits; give that of the run whose voxels are wanted", g.Onto)
		c.That(g.Use == useAuto && !r.ownGrid(), "grid.onto", "the grid is that of the cube; leave first_nm, step_nm, count and use: off out")
	}
}

// ownGrid tells whether the recipe gives a grid of its own.
func (r *Recipe) ownGrid() bool {
	return r.Grid.FirstNM != 0 || r.Grid.StepNM != 0 || r.Grid.Count != 0
}

// grid is the cube's wavelength axis.
func (r *Recipe) grid(p *instrument.Profile) instrument.Grid {
	if !r.ownGrid() {
		return p.Grid
	}
	g := r.Grid
	return instrument.Grid{FirstNM: g.FirstNM, StepNM: g.StepNM, Count: g.Count, Axis: g.Axis, Spacing: g.Spacing}
}
