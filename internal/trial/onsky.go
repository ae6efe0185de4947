package trial

import (
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Airy is a field of a low dispersion, 400 to 900 nm at 2.5 nm a voxel, under an air that
// dims and, if refraction is asked for, bends: five stars of different colours on a sky
// with lines. Extinction is that of the profile's site.
func Airy(refraction bool) (*Field, error) {
	f, err := load("optical", "demo")
	if err != nil {
		return nil, err
	}
	p := f.Profile
	p.DMD.Columns, p.DMD.Rows = 100, 72
	s := &p.Spectrograph
	s.TraceTilt, s.CenterNM, s.DispersionPxPerNM = 0.006, 650, [3]float64{0.4, 4e-6, 0}
	s.XCenterPx, s.YCenterPx = 171.7, 39.2
	s.Throughput = instrument.Curve{
		{WavelengthNM: 382, Fraction: 0}, {WavelengthNM: 396, Fraction: 0.2}, {WavelengthNM: 500, Fraction: 0.33}, {WavelengthNM: 650, Fraction: 0.36},
		{WavelengthNM: 800, Fraction: 0.3}, {WavelengthNM: 904, Fraction: 0.2}, {WavelengthNM: 918, Fraction: 0},
	}
	p.Grid = instrument.Grid{FirstNM: 400, StepNM: 2.5, Count: 201}
	TwoAmplifiers(&p.Detector, 344, 80)
	f.Target.DwellSeconds = 20
	f.small()
	f.scenery = func() {
		f.Scene = skyWithLines(p.Grid, 20.5, 3e-18)
		f.Scene.SeeingFWHMArcsec = 1.2
		f.Scene.Atmosphere = &rehearse.Atmosphere{Extinction: p.Site.Extinction, Refraction: refraction}
		for i, at := range StarPlaces[:5] {
			f.addStar(at, 13.6, 4000+3000*float64(i))
		}
	}
	f.scenery()
	return f, f.Culminate(1.5)
}

// addStar puts a star at a place in parts of the field's half extents.
func (f *Field) addStar(at [2]float64, mag, kelvin float64) {
	halfU, halfW := f.HalfArcsec()
	east, north := f.SkyOf(at[0]*halfU, at[1]*halfW)
	f.Scene.Sources = append(f.Scene.Sources, rehearse.Source{
		Kind: rehearse.KindStar, EastArcsec: east, NorthArcsec: north, ABMag: &mag, AtNM: 550, TemperatureK: kelvin,
	})
}

// OneStar leaves one star, a white one, near the field's middle, as of a reference star.
func (f *Field) OneStar(mag float64) {
	f.Scene.Sources = nil
	f.addStar([2]float64{0.08, -0.11}, mag, 20000)
}

// beforeCulmination is when a night of the small fields has to begin for the target to
// culminate about the middle of its science frames.
const beforeCulmination = 22 * time.Minute

// Culminate moves the target south so that it culminates at an air mass, about the middle
// of the science frames: there the air mass hardly changes. A field of five stars does not
// tell how the light of each colour fades while they set.
func (f *Field) Culminate(airmass float64) error {
	start, err := time.Parse(time.RFC3339, f.Target.StartUTC)
	if err != nil {
		return err
	}
	site, t := f.Profile.Site, f.Target
	at := func(minutes int) (time.Time, float64) {
		when := start.Add(time.Duration(minutes) * time.Minute)
		return when, physics.TargetAirmass(t.RADeg, t.DecDeg, when, site.LatitudeDeg, site.LongitudeEastDeg)
	}
	zenith := math.Acos(1/airmass) * 180 / math.Pi
	t.DecDeg = math.Round(100*(site.LatitudeDeg-zenith)) / 100
	best, least := start, math.Inf(1)
	for minutes := -12 * 60; minutes < 12*60; minutes++ {
		if when, x := at(minutes); x < least {
			best, least = when, x
		}
	}
	if math.Abs(least-airmass) > 0.01 {
		return fmt.Errorf("the target culminates at an air mass of %.3f, not %g", least, airmass)
	}
	t.StartUTC = best.Add(-beforeCulmination).Format(time.RFC3339)
	return nil
}

// StarFlux is the true flux of a star, aW m-2 nm-1 above the air.
func StarFlux(s *rehearse.Source, nm float64) float64 {
	flux := physics.ABFlux(*s.ABMag, s.AtNM)
	if s.TemperatureK > 0 {
		return flux * physics.PlanckEnergy(nm, s.TemperatureK) / physics.PlanckEnergy(s.AtNM, s.TemperatureK)
	}
	return physics.ABFlux(*s.ABMag, nm)
}

// WriteFluxTable writes the table of a star's fluxes.
func WriteFluxTable(path string, s *rehearse.Source, firstNM, lastNM float64) error {
	var b strings.Builder
	b.WriteString("wavelength_nm,flux_aw_m2_nm\n")
	for nm := firstNM; nm <= lastNM; nm++ {
		fmt.Fprintf(&b, "%g,%g\n", nm, StarFlux(s, nm))
	}
	return os.WriteFile(path, []byte(b.String()), 0o644)
}

// OnSkyRecipe is the nominal recipe with throughput and repairs, refraction taken
// out where the scene has one, and with sky and flux.
func (f *Field) OnSkyRecipe(sky reduce.SkyRecipe, flux reduce.FluxRecipe) (*reduce.Recipe, error) {
	r, err := reduce.LoadRecipe("nominal")
	if err != nil {
		return nil, err
	}
	r.Throughput.Use, r.Repair.Use = "auto", "auto"
	r.Sky, r.Flux = sky, flux
	if f.Scene.Atmosphere.Refraction {
		r.Grid.Refraction = "auto"
	}
	return r, nil
}

// StarNight makes a run on a reference star of magnitude mag at an air mass, and its
// table; it gives the recipe's flux. The night is of another sky than f's.
func (f *Field) StarNight(ctx context.Context, dir string, mag, airmass float64, seed uint64) (reduce.FluxRecipe, error) {
	none := reduce.FluxRecipe{Use: "off"}
	g := *f
	target := *f.Target
	g.Target = &target
	g.Scene = &rehearse.Scene{SeeingFWHMArcsec: f.Scene.SeeingFWHMArcsec, Sky: f.Scene.Sky, Atmosphere: f.Scene.Atmosphere}
	g.OneStar(mag)
	if err := g.Culminate(airmass); err != nil {
		return none, err
	}
	n, err := g.Plan(ctx, dir)
	if err != nil {
		return none, err
	}
	if err := n.Rehearse(ctx, "star", rehearse.Options{Seed: seed, NoTruth: true}); err != nil {
		return none, err
	}
	recipe, err := f.OnSkyRecipe(reduce.SkyRecipe{Use: "auto"}, none)
	if err != nil {
		return none, err
	}
	result, err := n.Reduce(ctx, "star", reduce.Options{Cube: true, Recipe: recipe})
	if err != nil {
		return none, err
	}
	if len(result.Degraded) > 0 {
		return none, errors.New(strings.Join(result.Degraded, "; "))
	}
	table := filepath.Join(dir, "star.csv")
	return reduce.FluxRecipe{Use: n.CubePath("star"), Star: table}, WriteFluxTable(table, &g.Scene.Sources[0], 350, 950)
}

// FluxTruth turns a truth in electrons, less its sky, into flux: what the instrument and
// the air did to it is known. Voxels where neither lets light through are NaN.
func (n *Night) FluxTruth(c *Cube, name string) ([]float32, error) {
	truth, err := n.SkylessTruth(c, name)
	if err != nil {
		return nil, err
	}
	air, err := n.air(name)
	if err != nil {
		return nil, err
	}
	p, grid := n.Seq.Profile, n.Seq.Profile.Grid
	area, seconds := p.CollectingAreaM2(), n.Seq.Target.DwellSeconds
	for l := range c.Voxels {
		const samples = 16
		per := 0.0
		for i := range samples {
			nm := grid.WavelengthNM(float64(l) - 0.5 + (float64(i)+0.5)/samples)
			per += area * p.Throughput(nm) * physics.PhotonsFromFlux(1, nm) * air(nm) * seconds * grid.StepNM / samples
		}
		plane := c.N * c.Rows
		for i := l * plane; i < (l+1)*plane; i++ {
			truth[i] = float32(float64(truth[i]) / per)
		}
	}
	return truth, nil
}

// air is the transmission in the mean of the science frames, from their ledger's times.
func (n *Night) air(name string) (func(nm float64) float64, error) {
	ledger, err := product.ReadLedger(filepath.Join(n.Run(name), product.LedgerFile))
	if err != nil {
		return nil, err
	}
	site, target := n.Seq.Profile.Site, n.Seq.Target
	var masses []float64
	for _, e := range ledger {
		if e.Kind != "science" || !e.Verdict.Used() {
			continue
		}
		start, err := time.Parse("2006-01-02T15:04:05.999", e.DateObs)
		if err != nil {
			return nil, err
		}
		middle := start.Add(time.Duration(e.ExptimeS / 2 * float64(time.Second)))
		masses = append(masses, physics.TargetAirmass(target.RADeg, target.DecDeg, middle, site.LatitudeDeg, site.LongitudeEastDeg))
	}
	curve := n.Field.Scene.Atmosphere.Extinction.Curve()
	return func(nm float64) float64 {
		sum := 0.0
		for _, x := range masses {
			sum += physics.AirTransmission(curve.At(nm), x) / float64(len(masses))
		}
		return sum
	}, nil
}

// Visible is the embedded demo field of the profile "visible", with its reference star.
func Visible() (*Field, error) {
	f, err := load("visible", "demo-visible")
	if err != nil {
		return nil, err
	}
	f.Scene, err = rehearse.LoadScene("demo-visible")
	return f, err
}
