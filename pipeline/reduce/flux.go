package reduce

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"strings"
	"time"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/skyflux"
)

// FluxRecipe rules the calibration of the flux by a reference star: this night's frames of
// it through one wide element (auto), or the cube.fits of a run on it, found at a position
// or, without, as the brightest; and its table of fluxes.
type FluxRecipe struct {
	Use  string `yaml:"use"`
	Star string `yaml:"star" config:"optional"`
	// RADeg and DecDeg are ICRS.
	RADeg  *float64 `yaml:"ra_deg" config:"optional"`
	DecDeg *float64 `yaml:"dec_deg" config:"optional"`
	// RadiusArcsec is that within which the star's light is added up; 0 for a multiple of
	// its width.
	RadiusArcsec float64 `yaml:"radius_arcsec" config:"optional"`
}

func (f FluxRecipe) check(c *config.Checks) {
	if f.Use == useOff {
		c.That(f.Star == "" && f.RADeg == nil && f.DecDeg == nil && f.RadiusArcsec == 0, "flux.use", "off leaves the other keys of flux without effect; write use: FILE, or leave them out")
		return
	}
	c.That(f.Use == useAuto || strings.HasSuffix(f.Use, ".fits"), "flux.use", "%q is unknown; use off, auto for this night's refstar frames, or the cube.fits of a run on a reference star", f.Use)
	c.That(f.Use != useAuto || f.RADeg == nil && f.DecDeg == nil, "flux.ra_deg", "a position finds the star in a cube; with use: auto it is that of the target's calibration.refstar; leave ra_deg and dec_deg out")
	c.That(strings.HasSuffix(f.Star, ".csv"), "flux.star", "%q is no table of the star's flux; give a .csv of wavelengths and fluxes", f.Star)
	if f.RADeg != nil {
		c.Within("flux.ra_deg", *f.RADeg, 0, 360)
	}
	if f.DecDeg != nil {
		c.Within("flux.dec_deg", *f.DecDeg, -90, 90)
	}
	c.That((f.RADeg == nil) == (f.DecDeg == nil), "flux.dec_deg", "a position has both ra_deg and dec_deg, degrees; give both or neither")
	c.Within("flux.radius_arcsec", f.RadiusArcsec, 0, 600)
}

func (f FluxRecipe) place() skyflux.StarPlace {
	return skyflux.StarPlace{RADeg: f.RADeg, DecDeg: f.DecDeg, RadiusArcsec: f.RadiusArcsec}
}

// settings are what run.json says of the recipe.
func (f FluxRecipe) settings() map[string]any {
	m := map[string]any{"use": f.Use}
	if f.Use != useOff {
		m["star"], m["radius_arcsec"] = f.Star, f.RadiusArcsec
		if f.RADeg != nil {
			m["ra_deg"], m["dec_deg"] = *f.RADeg, *f.DecDeg
		}
	}
	return m
}

// checkFlux looks at what the flux is to be calibrated by, before the work begins.
func (r *reduction) checkFlux() error {
	f := r.opts.Recipe.Flux
	if f.Use == useOff || !r.opts.Cube {
		return nil
	}
	table, err := loadFluxTable(f.Star)
	if err != nil {
		return err
	}
	r.onSky.table = table
	if err := r.fluxCovers(table); err != nil {
		return err
	}
	if f.Use == useAuto {
		return r.checkStarMemory()
	}
	source, err := r.openStar(f.Use)
	if err != nil {
		return err
	}
	return source.Close()
}

// loadFluxTable reads a star's table of fluxes.
func loadFluxTable(path string) (calib.FluxTable, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return calib.FluxTable{}, fmt.Errorf("read the star's table of fluxes: %w", err)
	}
	return calib.ParseFluxTable(path, data)
}

// leastCovered is the part of the cube's wavelengths that inputs must cover.
const leastCovered = 0.5

// fluxCovers refuses inputs that say nothing of most of the cube.
func (r *reduction) fluxCovers(table calib.FluxTable) error {
	axis := r.schema.Axis()
	if axis.Grid.Count == 0 { // before the schema is made
		axis.Grid = r.opts.Recipe.grid(r.seq.Profile)
	}
	n := axis.Grid.Count
	covered := func(first, last float64) int {
		some := 0
		for l := range n {
			if axis.ObservedNM(float64(l)-0.5) >= first && axis.ObservedNM(float64(l)+0.5) <= last {
				some++
			}
		}
		return some
	}
	first, last := table.VacuumNm[0], table.VacuumNm[len(table.VacuumNm)-1]
	if some := covered(first, last); float64(some) < leastCovered*float64(n) {
		return fmt.Errorf("%s: the table goes from %.5g to %.5g nm, which covers %d of the cube's %d wavelengths (%.5g to %.5g nm); give a longer one", r.opts.Recipe.Flux.Star, first, last, some, n, axis.FirstNM(), axis.LastNM())
	}
	curve := r.seq.Profile.Site.Extinction.Curve()
	if len(curve) == 0 {
		return nil
	}
	first, last = curve[0].VacuumNm, curve[len(curve)-1].VacuumNm
	if some := covered(first, last); float64(some) < leastCovered*float64(n) {
		return fmt.Errorf("profile.yaml: site.extinction goes from %.5g to %.5g nm, which covers %d of the cube's %d wavelengths (%.5g to %.5g nm); give a longer curve", first, last, some, n, axis.FirstNM(), axis.LastNM())
	}
	return nil
}

// openStar opens the cube of the reference star and checks that it can serve.
func (r *reduction) openStar(path string) (*skyflux.Source, error) {
	source, err := skyflux.Open(path)
	if err != nil {
		return nil, fmt.Errorf("flux.use: %w", err)
	}
	err = func() error {
		if name, err := source.Primary().Str("PROFNAME"); err != nil || name != r.seq.ProfileName {
			return fmt.Errorf("flux.use: %s is of the instrument %q, not %q; give a run of this one", path, name, r.seq.ProfileName)
		}
		if source.Unit() != product.UnitSignal {
			return fmt.Errorf("flux.use: %s is in %s; reduce the star's night with flux: {use: off}", path, source.Unit())
		}
		schema, err := source.Schema()
		if err != nil {
			return err
		}
		_, _, err = skyflux.WhereStar(path, schema, r.opts.Recipe.Flux.place())
		return err
	}()
	if err != nil {
		source.Close() // only read from
		return nil, err
	}
	return source, nil
}

// measureFlux finds how counts become flux. Where inputs turn out to be wanting the cube
// stays in counts and is not whole.
func (r *reduction) measureFlux(ctx context.Context, o skyflux.Options) error {
	f := r.opts.Recipe.Flux
	if f.Use == useOff {
		return nil
	}
	flux, err := r.fluxOf(ctx, o)
	if ctx.Err() != nil {
		return ctx.Err()
	}
	if err != nil {
		r.degrade("the flux was not calibrated: %v", err)
		return nil
	}
	flux.Report.Star, flux.Report.Table = r.starName(), f.Star
	if flux.Unknown > 0 {
		r.degrade("the flux of %d of %d wavelengths is not known, as the star's table, its spectrum or the extinction curve ends before them: their voxels are NODATA", flux.Unknown, r.schema.Grid.Count)
	}
	r.judgeAir(flux.Report)
	r.onSky.flux, r.onSky.done.Flux = flux, &flux.Record
	return nil
}

const (
	// sameAir is the difference of air masses that costs less than 2 % where the extinction is 0.2
	// mag.
	sameAir = 0.1
	// airSlack is by how much an air mass may differ from that of the time and place.
	airSlack = 0.05
)

// judgeAir says what is wanting where no extinction is known.
func (r *reduction) judgeAir(f product.FluxReport) {
	if f.Extinction {
		return
	}
	text := fmt.Sprintf("the profile has no site.extinction: the flux holds for the air mass of the star, %.2f, while the science frames were taken at %.2f", f.StarAirmass, f.Airmass)
	if math.Abs(f.StarAirmass-f.Airmass) > sameAir {
		r.degrade("%s", text)
		return
	}
	r.warn("%s", text)
}

// fluxOf calibrates by the star's cube.
func (r *reduction) fluxOf(ctx context.Context, o skyflux.Options) (*skyflux.Flux, error) {
	if r.onSky.airError != nil {
		return nil, r.onSky.airError
	}
	if r.opts.Recipe.Flux.Use == useAuto {
		return r.fluxOfFrames(ctx)
	}
	source, err := r.openStar(r.opts.Recipe.Flux.Use)
	if err != nil {
		return nil, err
	}
	defer source.Close() // only read from
	seen, err := r.starAir(source)
	if err != nil {
		return nil, err
	}
	var sky *skyflux.Sky
	if !source.Subtracted() {
		if sky, err = source.SkyOfStar(ctx, o); err != nil {
			return nil, fmt.Errorf("%s: %w", r.opts.Recipe.Flux.Use, err)
		}
	}
	star, err := source.MeasureStar(ctx, r.opts.Recipe.Flux.place(), sky, o)
	if err != nil {
		return nil, err
	}
	flux, err := skyflux.Calibrate(star, r.onSky.table, seen, r.onSky.air, r.seq.Profile, r.edgesNM())
	if err != nil {
		return nil, fmt.Errorf("%s with %s: %w", r.opts.Recipe.Flux.Use, r.opts.Recipe.Flux.Star, err)
	}
	return flux, nil
}

// edgesNM are the edges of the cube's voxels at the telescope.
func (r *reduction) edgesNM() []float64 {
	axis := r.schema.Axis()
	edges := make([]float64, axis.Grid.Count+1)
	for l := range edges {
		edges[l] = axis.ObservedNM(float64(l) - 0.5)
	}
	return edges
}

// scienceAir is the time of one science exposure, and the air masses of all that were used:
// those of their headers, or of their time.
func (r *reduction) scienceAir() (skyflux.Exposures, error) {
	e := skyflux.Exposures{Seconds: r.roles.calibration.scienceSeconds}
	site, target := r.seq.Profile.Site, r.seq.Target
	doubtful := 0
	used := r.usedScience()
	for _, f := range r.night.Of(sequence.Science) {
		if !used[f.StepIndex] {
			continue
		}
		x, computed := f.Airmass, math.NaN()
		if !f.Start.IsZero() {
			middle := f.Start.Add(time.Duration(e.Seconds / 2 * float64(time.Second)))
			computed = physics.TargetAirmass(target.RADeg, target.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg)
		}
		if x != x {
			x = computed
		}
		if !(x >= 0.99) || math.IsInf(x, 0) {
			return e, fmt.Errorf("%s has no air mass, and no time at which the target is above the horizon; add AIRMASS or DATE-OBS to the frames' headers", r.night.Ledger[f.StepIndex].File)
		}
		if math.Abs(x-computed) > airSlack*x {
			doubtful++
		}
		e.Airmasses = append(e.Airmasses, x)
	}
	if len(e.Airmasses) == 0 {
		return e, errors.New("no science frame was used")
	}
	if doubtful > 0 {
		r.warn("the air mass of %d frames is not that of the target at their time, by more than %.0f %%; that of their headers was taken: check the site, and the units of ra_deg", doubtful, 100*airSlack)
	}
	return e, nil
}

// usedScience are the ledger's rows of the frames that the cube is made of.
func (r *reduction) usedScience() map[int]bool {
	used := map[int]bool{}
	for _, frames := range r.roles.slots {
		for _, f := range frames {
			used[f.Entry] = true
		}
	}
	return used
}

// starAir is the same of the star's cube: as its header says, or from its ledger.
func (r *reduction) starAir(source *skyflux.Source) (skyflux.Exposures, error) {
	var e skyflux.Exposures
	path := r.opts.Recipe.Flux.Use
	table, err := source.Table(product.Frames)
	if err != nil {
		return e, err
	}
	kinds, err := table.Strings("kind")
	if err != nil {
		return e, err
	}
	seconds, err := table.Float64s("exptime_s")
	if err != nil {
		return e, err
	}
	starts, err := table.Strings("date_obs")
	if err != nil {
		return e, err
	}
	verdicts, err := table.Strings("verdict")
	if err != nil {
		return e, err
	}
	schema, err := source.Schema()
	if err != nil {
		return e, err
	}
	site := r.seq.Profile.Site
	for i, kind := range kinds {
		if kind != string(sequence.Science) || !product.Verdict(verdicts[i]).Used() {
			continue
		}
		if e.Seconds == 0 {
			e.Seconds = seconds[i]
		}
		start, err := pair.ParseDateObs(starts[i])
		if err != nil {
			continue
		}
		middle := start.Add(time.Duration(e.Seconds / 2 * float64(time.Second)))
		if x := physics.TargetAirmass(schema.RADeg, schema.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg); !math.IsNaN(x) {
			e.Airmasses = append(e.Airmasses, x)
		}
	}
	if x, err := source.Primary().Float(cardAirmass); err == nil {
		e.Airmasses = []float64{x}
	}
	if !(e.Seconds > 0) || len(e.Airmasses) == 0 {
		return e, fmt.Errorf("%s does not tell the exposure time and the air mass of the star: its frames have neither AIRMASS nor DATE-OBS; add them and reduce it again with sky: {use: auto}", path)
	}
	return e, nil
}

// cardAirmass is the mean of the science frames'.
const cardAirmass = "AIRMASS"

// airCards are for the primary header of a cube that was brought to the sky; none for one
// that stays as it is.
func (r *reduction) airCards() []fitsutil.Card {
	if r.onSky.done == (product.OnSky{}) {
		return nil
	}
	cards := []fitsutil.Card{{Key: "EXPTIME", Value: r.roles.calibration.scienceSeconds, Comment: "[s] one science exposure"}}
	if x := r.onSky.air.Airmass(); x > 0 {
		cards = append(cards, fitsutil.Card{Key: cardAirmass, Value: x, Comment: "mean of the science exposures"})
	}
	if f := r.onSky.flux; f != nil {
		cards = append(cards,
			fitsutil.Card{Key: "FLUXSTAR", Value: r.opts.Recipe.Flux.Star, Comment: "table of the reference star"},
			fitsutil.Card{Key: "STARAIRM", Value: f.Report.StarAirmass, Comment: "air mass of the reference star"},
			fitsutil.Card{Key: "SLITFRAC", Value: f.Report.SlitFraction, Comment: "part of the star's light that was measured"},
		)
	}
	return cards
}
