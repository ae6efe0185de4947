package reduce

import (
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"mirrorloom/calib"
	"mirrorloom/pipeline/kept"
	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
)

// preparedFile lies beside the masters, and is whole or not there.
const preparedFile = "prepared.bin"

// prepared is what the stages before the strips found: with the sequence, the frames, the
// recipe and the masters it is all that the strips need, on any machine.
type prepared struct {
	// Masters is the digest of the masters' file.
	Masters            kept.Digest
	BadPixels          int
	Night              pair.Night
	Degraded, Warnings []string
	Schema             product.Schema
	Shift              *product.FieldShift
	Report             product.Calibration
	Optics             preparedOptics
	Correction         preparedCorrection
	Throughput         *preparedThroughput // nil where it was not asked for
	Stages             []product.Stage
}

// preparedOptics is optics.
type preparedOptics struct {
	Geometry            calib.Geometry
	NominalWave, NoFlat bool
	DarkAmplifiers      []int
	Arcs                *calib.ArcSolution
	Trace               *calib.TraceSolution
	Pixel               *calib.PixelResponse
	Response            *calib.Response
	Neighbour, Leak     *calib.ColourTerm
}

// preparedCorrection is correction.
type preparedCorrection struct {
	Offset, Factor, Variance []float64
	Leak                     float64
	Terms                    *preparedTerms
}

// preparedTerms is terms but for what follows from the sequence and the geometry.
type preparedTerms struct {
	Tables      [termCount]*preparedTable
	E, Variance [termCount][]float64
}

type preparedTable struct {
	First  float64
	Values []float32
}

// preparedThroughput is of throughput what the report and run.json tell.
type preparedThroughput struct {
	Minutes   []float64
	C, Err    []float64 // of what is believed
	Corrected bool
	Curves    []report.Curve
	Report    product.Throughput
}

// errNoState says that nothing was left to go on with.
var errNoState = errors.New("no state was left")

func (r *reduction) preparedPath() string { return filepath.Join(r.scratch(), preparedFile) }

// savePrepared writes the state that the strips start from.
func (r *reduction) savePrepared(context.Context) (bytes int64, err error) {
	masters, err := fileDigest(filepath.Join(r.scratch(), mastersFile))
	if err != nil {
		return 0, fmt.Errorf("scratch file: %w", err)
	}
	p := &prepared{
		Masters: masters, BadPixels: r.badPixels, Night: *r.night, Degraded: r.roles.degraded, Warnings: r.roles.warnings,
		Schema: r.schema, Shift: r.shift, Report: r.report, Optics: r.optics.keep(), Correction: r.correction.keep(), Throughput: r.through.keep(),
		Stages: r.stages,
	}
	if r.state, err = kept.WriteState(r.preparedPath(), *r.dependence, *p); err != nil {
		return 0, err
	}
	info, err := os.Stat(r.preparedPath())
	if err != nil {
		return 0, err
	}
	return info.Size(), nil
}

// loadPrepared reads a state that was left, if everything is as it was. The error is
// errNoState, or says why it cannot be used.
func (r *reduction) loadPrepared() (*prepared, error) {
	s, err := kept.OpenState(r.preparedPath())
	if errors.Is(err, os.ErrNotExist) {
		return nil, errNoState
	}
	if err != nil {
		return nil, err
	}
	defer s.Close()
	var was dependence
	if err := s.Decode(&was); err != nil {
		return nil, errors.New("it was made by another version")
	}
	if text := r.dependence.changed(&was); text != "" {
		return nil, errors.New(text)
	}
	p := new(prepared)
	if err := s.Decode(p); err != nil {
		return nil, err
	}
	masters, err := fileDigest(filepath.Join(r.scratch(), mastersFile))
	if err != nil || masters != p.Masters {
		return nil, errors.New("its masters are not as they were left")
	}
	r.state = s.Digest
	return p, nil
}

// fileDigest is the SHA-256 of a file.
func fileDigest(path string) (kept.Digest, error) {
	f, err := os.Open(path)
	if err != nil {
		return kept.Digest{}, err
	}
	defer f.Close() // only read from
	sum := sha256.New()
	_, err = io.Copy(sum, f)
	return kept.Digest(sum.Sum(nil)), err
}

// takePrepared puts the reduction where the stages that made p had brought it. The frames
// are those of the night's folder as it is named now.
func (r *reduction) takePrepared(p *prepared) error {
	r.night, r.badPixels, r.stages = &p.Night, p.BadPixels, p.Stages
	r.night.Dir = r.opts.Night
	for i := range r.night.Frames {
		f := &r.night.Frames[i]
		f.Path = filepath.Join(r.opts.Night, filepath.Base(f.Path))
	}
	if err := r.openFrames(); err != nil {
		return err
	}
	r.roles.degraded, r.roles.warnings = p.Degraded, p.Warnings
	var err error
	if r.masters, err = openMasters(r.scratch()); err != nil {
		return err
	}
	r.masters.file.CountInto(&r.traffic)
	r.schema, r.shift, r.report = p.Schema, p.Shift, p.Report
	r.usage = newUsage(r.seq)
	r.optics, r.through = p.Optics.take(), p.Throughput.take()
	r.placeStuck()
	r.correction, err = p.Correction.take(r)
	return err
}

func (o *optics) keep() preparedOptics {
	return preparedOptics{
		Geometry: o.geometry, NominalWave: o.nominalWave, NoFlat: o.noFlat, DarkAmplifiers: o.darkAmplifiers,
		Arcs: o.arcs, Trace: o.trace, Pixel: o.pixel, Response: o.response, Neighbour: o.neighbour, Leak: o.leak,
	}
}

func (o *preparedOptics) take() optics {
	return optics{
		geometry: o.Geometry, nominalWave: o.NominalWave, noFlat: o.NoFlat, darkAmplifiers: o.DarkAmplifiers,
		arcs: o.Arcs, trace: o.Trace, pixel: o.Pixel, response: o.Response, neighbour: o.Neighbour, leak: o.Leak,
	}
}

func (c *correction) keep() preparedCorrection {
	p := preparedCorrection{Offset: c.offset, Factor: c.factor, Variance: c.variance, Leak: c.leak}
	if t := c.terms; t != nil {
		p.Terms = &preparedTerms{E: t.e, Variance: t.variance}
		for m, table := range t.tables {
			if table != nil {
				p.Terms.Tables[m] = &preparedTable{table.first, table.values}
			}
		}
	}
	return p
}

func (p *preparedCorrection) take(r *reduction) (*correction, error) {
	c := &correction{offset: p.Offset, factor: p.Factor, variance: p.Variance, leak: p.Leak}
	if p.Terms == nil {
		return c, nil
	}
	code, err := r.code()
	if err != nil {
		return nil, err
	}
	c.terms = r.newTerms(code)
	c.terms.e, c.terms.variance = p.Terms.E, p.Terms.Variance
	for m, table := range p.Terms.Tables {
		c.terms.tables[m] = nil
		if table != nil {
			c.terms.tables[m] = &termTable{table.First, table.Values}
		}
	}
	return c, nil
}

func (t *throughput) keep() *preparedThroughput {
	if t == nil {
		return nil
	}
	p := &preparedThroughput{Minutes: t.minutes, Corrected: t.corrected, Curves: t.curves, Report: t.report}
	p.C, p.Err = t.believed()
	return p
}

func (p *preparedThroughput) take() *throughput {
	if p == nil {
		return nil
	}
	return &throughput{minutes: p.Minutes, c: p.C, err: p.Err, corrected: p.Corrected, curves: p.Curves, report: p.Report}
}
