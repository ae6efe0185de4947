package report

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path/filepath"

	"mirrorloom/fitsutil"
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
	if err := p.addThroughput(in); err != nil {
		return nil, err
	}
	c, err := openCube(filepath.Join(runDir, product.CubeFile))
	if errors.Is(err, fs.ErrNotExist) {
		return p, nil
	}
	if err != nil {
		return nil, err
	}
	defer c.file.Close() // only read from
	p.addCube(in)
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
	places := choosePlaces(light, sky)
	p.Flags = light.flagShares()
	if p.Picture, err = drawPicture(light, sky, places); err != nil {
		return nil, err
	}
	p.PictureNote = light.note()
	var spectra []*spectrum
	for _, at := range places {
		s, err := c.spectrum(ctx, at, in.Schema.Grid)
		if err != nil {
			return nil, err
		}
		spectra = append(spectra, s)
	}
	if err := p.addSums(ctx, c.file.Path(), places); err != nil {
		return nil, err
	}
	charts, err := drawSpectra(spectra, in.Schema.Grid, c.unitWord())
	if err != nil {
		return nil, err
	}
	for i, at := range places {
		p.Spectra = append(p.Spectra, spectrumView{Place: at.describe(light, sky), Label: at.label, Chart: charts[i]})
	}
	return p, nil
}
