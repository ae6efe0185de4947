package reduce

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/skyflux"
)

// SkyRecipe rules the subtraction of the sky. Elements and Rows, from the first to the
// last, name places of blank sky; without either, a rule chooses them.
type SkyRecipe struct {
	Use      string   `yaml:"use"`
	Elements [][2]int `yaml:"elements" config:"optional"`
	Rows     [][2]int `yaml:"rows" config:"optional"`
}

func (s SkyRecipe) check(c *config.Checks) {
	c.OneOf("sky.use", s.Use, useAuto, useOff)
	for _, named := range []struct {
		key    string
		ranges [][2]int
	}{{"sky.elements", s.Elements}, {"sky.rows", s.Rows}} {
		c.That(len(named.ranges) == 0 || s.Use == useAuto, named.key, "the sky is off, so that naming it has no effect; write use: auto")
		for i, r := range named.ranges {
			c.That(r[0] >= 0 && r[1] >= r[0], fmt.Sprintf("%s[%d]", named.key, i), "%d to %d is no range; give the first and the last, counted from 0", r[0], r[1])
		}
	}
}

// onSky is what becomes of the cube once it is made in counts.
type onSky struct {
	sky   *skyflux.Sky
	flux  *skyflux.Flux
	done  product.OnSky
	table calib.FluxTable // of the reference star
	// air is that of the science exposures, or airError why it is not known.
	air      skyflux.Exposures
	airError error
}

// toSky tells whether something does.
func (r *reduction) toSky() bool {
	return r.opts.Cube && (r.opts.Recipe.Sky.Use != useOff || r.opts.Recipe.Flux.Use != useOff)
}

// cubePath is where the cube is made: beside the masters if it is only the beginning.
func (r *reduction) cubePath() string {
	if r.toSky() {
		return filepath.Join(r.scratch(), product.CubeFile)
	}
	return filepath.Join(r.opts.Out, product.CubeFile)
}

// bringToSky writes the cube anew without the light of the sky, in units of flux. What cannot be found is
// said, and the cube stays as it is.
func (r *reduction) bringToSky(ctx context.Context) (int64, error) {
	if err := r.writeResponses(); err != nil {
		return 0, err
	}
	if err := r.cube.Commit(); err != nil {
		return 0, err
	}
	r.cube = nil
	source, err := skyflux.Open(r.cubePath())
	if err != nil {
		return 0, err
	}
	defer source.Close() // only read from
	source.CountInto(&r.traffic)
	o := skyflux.Options{
		MemoryBytes: r.opts.MemoryBytes - runtimeBytes - r.heldBytes(), Workers: r.opts.Workers,
		Progress: func(pass string, done, total int) { r.opts.Progress(pass, done, total) },
	}
	r.onSky.air, r.onSky.airError = r.scienceAir()
	if err := r.measureSky(ctx, source, o); err != nil {
		return 0, err
	}
	if err := r.measureFlux(ctx, o); err != nil {
		return 0, err
	}
	primary, err := r.primary()
	if err != nil {
		return 0, err
	}
	if err := setCards(primary, append(r.onSky.done.Cards(), r.airCards()...)); err != nil {
		return 0, err
	}
	images, err := r.cubeImages(r.onSky.done)
	if err != nil {
		return 0, err
	}
	if r.cube, err = fitsutil.CreateCube(filepath.Join(r.opts.Out, product.CubeFile), primary, images); err != nil {
		return 0, err
	}
	r.cube.CountInto(&r.traffic)
	voided, good, err := source.Write(ctx, r.cube, r.onSky.sky, r.onSky.flux.Factors(), o)
	if err != nil {
		return 0, err
	}
	r.lessGood(voided, good)
	// What it was made of stays until the end: an interrupted run goes on from there.
	return 4 * r.shape.cubeBytes(), nil
}

// measureSky finds the sky; where there is none the cube is not whole.
func (r *reduction) measureSky(ctx context.Context, source *skyflux.Source, o skyflux.Options) error {
	recipe := r.opts.Recipe.Sky
	if recipe.Use == useOff {
		return nil
	}
	sky, err := source.MeasureSky(ctx, skyflux.Names{Elements: recipe.Elements, Rows: recipe.Rows}, r.lit(), r.alongSlit(), o)
	if ctx.Err() != nil {
		return ctx.Err()
	}
	if err != nil {
		r.degrade("the sky was not subtracted: %v", err)
		return nil
	}
	r.onSky.sky, r.onSky.done.Sky = sky, &sky.Record
	return nil
}

// alongSlit is by how much the variance of a mean over rows is above that of independent
// voxels, in the middle of the cube.
func (r *reduction) alongSlit() float64 {
	edges := make([]float64, r.schema.Grid.Count+1)
	y := r.camera.Rows / 2
	r.rectifier.geometry.EdgesX(edges, float64(r.seq.N()-1)/2, float64(y), r.schema.Grid.WavelengthNM(-0.5), r.schema.Grid.StepNM)
	_, slit := calib.Correlation(r.rectifier.shift, r.rectifier.columns, edges, y)
	if math.IsNaN(slit) {
		return 1
	}
	return slit
}

// lessGood takes voxels that lost their data from the figures of quality.
func (r *reduction) lessGood(voided, good int) {
	if voided > 0 {
		left := float64(good) / float64(good+voided)
		r.quality.GoodFraction *= left
		r.quality.CoveredGoodFraction *= left
	}
}

// finishOnSky appends the tables of what was done.
func (r *reduction) finishOnSky() error {
	if s := r.onSky.done.Sky; s != nil {
		if err := r.cube.AppendTable(s.Table()); err != nil {
			return err
		}
	}
	if f := r.onSky.done.Flux; f != nil {
		return r.cube.AppendTable(f.Table())
	}
	return nil
}

func setCards(h *fitsutil.Header, cards []fitsutil.Card) error {
	for _, c := range cards {
		if err := h.Set(c.Key, c.Value, c.Comment); err != nil {
			return err
		}
	}
	return nil
}

// skySection is run.json's; nil without a sky.
func (r *reduction) skySection() *product.SkyReport {
	if r.onSky.sky == nil {
		return nil
	}
	return &r.onSky.sky.Report
}

// fluxSection is run.json's; nil without a flux.
func (r *reduction) fluxSection() *product.FluxReport {
	if r.onSky.flux == nil {
		return nil
	}
	return &r.onSky.flux.Report
}

// settings are what run.json says of the recipe.
func (s SkyRecipe) settings() map[string]any {
	m := map[string]any{"use": s.Use}
	if len(s.Elements) > 0 {
		m["elements"] = s.Elements
	}
	if len(s.Rows) > 0 {
		m["rows"] = s.Rows
	}
	return m
}
