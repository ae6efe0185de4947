package report

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// Input is what the page says beside what it reads from cube.fits.
type Input struct {
	Run    *product.Run
	Ledger product.Ledger
	Schema product.Schema
	// Profile is the name of the instrument's profile.
	Profile string
	// Degraded says why the exit code is 3, a clause each. Clauses that
	// Run.Warnings repeats are shown once.
	Degraded []string
	// Throughput is that of the science frames, by each method and by all together.
	Throughput []Curve
	// Light is the cube's, as gathered while it was written; nil to have it read.
	Light *Light
}

// Write writes report.html into the folder runDir, whose cube.fits is whole. A
// folder without cube.fits gets a page without pictures.
//
// Errors are a *fitsutil.Error for a cube that cannot be read or a page that
// cannot be written, and ctx.Err when cancelled; then there is no new page.
func Write(ctx context.Context, runDir string, in Input) error {
	p, err := Draw(ctx, runDir, in)
	if err != nil {
		return err
	}
	return p.Write(in.Run.Stages)
}

// Page is a report that lacks but the stages, of which drawing it may be one.
type Page struct {
	page *page
	path string
}

// Draw makes all of the page that Write writes but the table of stages; stages of in are
// not looked at.
func Draw(ctx context.Context, runDir string, in Input) (*Page, error) {
	p, err := assemble(ctx, runDir, in)
	if err != nil {
		return nil, err
	}
	return &Page{page: p, path: filepath.Join(runDir, product.ReportFile)}, nil
}

// Write writes the page, with these stages.
func (p *Page) Write(stages []product.Stage) error {
	p.page.addStages(stages)
	return fitsutil.WriteAtomic(p.path, func(w io.Writer) error {
		if err := pageTemplate.Execute(w, p.page); err != nil {
			return fmt.Errorf("%s: %w", product.ReportFile, err)
		}
		return nil
	})
}

// assemble gathers all that the page shows.
func assemble(ctx context.Context, runDir string, in Input) (*page, error) {
	p := newPage(in)
	c, err := openCube(filepath.Join(runDir, product.CubeFile))
	if errors.Is(err, fs.ErrNotExist) {
		p.addDark(in.Run, 0, in.Schema.Rows)
		return p, nil
	}
	if err != nil {
		return nil, err
	}
	defer c.file.Close() // only read from
	p.addCube(in)
	p.addDark(in.Run, c.detectorColumns(), c.rows())
	light := in.Light
	if light == nil {
		if light, err = c.light(ctx); err != nil {
			return nil, err
		}
	}
	light.finish()
	sky, err := skyOf(c.signal.Header)
	if err != nil {
		return nil, err
	}
	shown := light
	if light.empty() { // show what there is
		c.bad = product.FlagBad &^ wholly
		if shown, err = c.light(ctx); err != nil {
			return nil, err
		}
		shown.finish()
		p.NoneGood = !shown.empty()
	}
	places := choosePlaces(shown, sky)
	s, err := c.survey(ctx, places, shown)
	if err != nil {
		return nil, err
	}
	if err := p.addPictures(ctx, c, in, shown, sky, places, s); err != nil {
		return nil, err
	}
	if err := p.addSpectra(c, in, shown, sky, places, s); err != nil {
		return nil, err
	}
	if err := p.addFlags(light, sky, s, in.Schema.Grid); err != nil {
		return nil, err
	}
	if light.empty() {
		return p, nil
	}
	return p, p.addSums(ctx, c.file.Path(), places)
}

// addPictures draws the field in white light and in lines.
func (p *page) addPictures(ctx context.Context, c *cube, in Input, light *Light, sky skyPlane, places []place, s *survey) error {
	white := picture{values: light.mean, elements: light.elements, rows: light.rows, label: "White-light picture of the field", unit: c.unitWord() + " a voxel", id: "white"}
	drawn, err := white.draw(sky, places)
	if err != nil || drawn == "" {
		return err
	}
	p.Pictures = append(p.Pictures, figureView{"White light", fmt.Sprintf("Mean over the good voxels of %s; darker is brighter. Elements run to the right and detector rows upwards, both counted from 0, at their true scale on the sky; the grid is of right ascension and declination (ICRS). Hatched places have no good voxel. The spectra of the ringed places follow.", light.note()), drawn})
	for i, w := range lineWindows(in.Run.Forecast, s, in.Schema.Grid, c.signal.Planes()) {
		values, err := c.linePicture(ctx, w, s)
		if err != nil {
			return err
		}
		line := picture{values: values, elements: light.elements, rows: light.rows, label: "Picture of the field in a line", unit: white.unit, id: fmt.Sprintf("line%d", i)}
		if drawn, err = line.draw(sky, nil); err != nil {
			return err
		}
		if drawn != "" {
			p.Pictures = append(p.Pictures, figureView{"Line at " + w.words(in.Schema.Grid), fmt.Sprintf("Mean of the wavelengths from %s in vacuum less that of wavelengths beside them: %s.", w.words(in.Schema.Grid), w.name), drawn})
		}
	}
	return nil
}

// addSpectra draws the spectra of places, with the lines of the sky.
func (p *page) addSpectra(c *cube, in Input, light *Light, sky skyPlane, places []place, s *survey) error {
	lines := skyLines(s.sky)
	done, err := product.ReadOnSky(c.file)
	if err != nil {
		return err
	}
	if done.Sky != nil {
		lines = middles(done.Sky.Line)
	}
	p.HasSky = len(lines) > 0
	for i, at := range places {
		f := figureView{Title: at.label, Caption: at.describe(light, sky), Drawing: drawSpectrum(s.spectra[i], at.label, in.Schema.Grid, c.unitWord(), lines)}
		p.Spectra = append(p.Spectra, f)
	}
	return nil
}

// addFlags shows the flags by place and by wavelength.
func (p *page) addFlags(light *Light, sky skyPlane, s *survey, grid instrument.Grid) error {
	p.Flags = light.flagShares()
	if len(s.sky) == 0 {
		return nil
	}
	byPlace, err := drawBadMap(light, sky)
	if err != nil {
		return err
	}
	p.FlagFigures = append(p.FlagFigures, figureView{"By place", "Part of the wavelengths of each place whose voxels are not good: white none, black all.", byPlace})
	if drawn := drawFlagSpectrum(s, grid); drawn != "" {
		p.FlagFigures = append(p.FlagFigures, figureView{"By wavelength", "Part of the voxels that have a flag, in a sample of the places that have light.", drawn})
	}
	return nil
}
