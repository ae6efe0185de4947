package extract

import (
	"encoding/csv"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"strconv"
	"strings"

	"mirrorloom/fitsutil"
)

// Names of the products of a spectrum.
const (
	SpectrumFITS = "spectrum.fits"
	SpectrumCSV  = "spectrum.csv"
	SpectrumPlot = "spectrum.svg"
)

// writeSpectrum writes table, text and plot into dir.
func (c *Cube) writeSpectrum(dir string, o SpectrumOptions, s *Spectrum) error {
	primary, err := c.primary(s.cards(o)...)
	if err != nil {
		return err
	}
	hdus := []any{s.table(c.Unit)}
	if len(s.Bands) > 0 {
		hdus = append(hdus, s.bandTable())
	}
	if len(s.Lines) > 0 {
		hdus = append(hdus, s.lineTable(bandUnit(c.Unit)))
	}
	covariance, err := s.covarianceImage(c.Unit)
	if err != nil {
		return err
	}
	if err := fitsutil.WriteFile(filepath.Join(dir, SpectrumFITS), primary, append(hdus, covariance)...); err != nil {
		return err
	}
	err = fitsutil.WriteAtomic(filepath.Join(dir, SpectrumCSV), func(w io.Writer) error { return s.WriteCSV(w, c.Unit) })
	if err != nil {
		return err
	}
	return fitsutil.WriteAtomic(filepath.Join(dir, SpectrumPlot), func(w io.Writer) error { return s.plot(w, "spectrum of "+o.Aperture.Text, c.Unit) })
}

func (s *Spectrum) cards(o SpectrumOptions) []card {
	weights := "plain sum"
	if o.Optimal {
		weights = "optimal"
	}
	cards := []card{
		{"APERTURE", o.Aperture.Text, "shape; arcsec"},
		{"POSFRAME", frameOf(o.Aperture), "what its positions are"},
		{"WEIGHTS", weights, "how voxels were added up"},
		{"AREA", s.Area, "voxels in the shape"},
		{"NCELLS", s.Cells, "cells it touches, with the background's"},
		{"MIDRA", s.Position.RADeg, "deg, middle of the shape"},
		{"MIDDEC", s.Position.DecDeg, "deg"},
		{"MIDELEM", s.Element, "element, from 0"},
		{"MIDROW", s.Row, "detector row, from 0"},
	}
	if o.Background != nil {
		cards = append(cards, card{"BACKGRND", o.Background.Text, "shape of the background, taken off"}, card{"BACKAREA", s.BackgroundArea, "voxels in it"})
	}
	return cards
}

func frameOf(s *Shape) string {
	if s.InVoxels {
		return "element, row"
	}
	return "ICRS"
}

func (s *Spectrum) table(unit string) *fitsutil.Table {
	return &fitsutil.Table{Name: "SPECTRUM", Columns: []fitsutil.Column{
		{Name: "WAVELENGTH", Format: "D", Unit: "nm", Data: s.WavelengthNM},
		{Name: "SIGNAL", Format: "D", Unit: unit, Data: s.Signal},
		{Name: "ERROR", Format: "D", Unit: unit, Data: s.Error},
		{Name: "NAIVE_ERROR", Format: "D", Unit: unit, Data: s.Naive},
		{Name: "COVERAGE", Format: "D", Data: s.Coverage},
		{Name: "FLAGS", Format: "I", Data: s.Flags},
	}}
}

// bandTable holds the bands; the unit is that of a sum over channels.
func (s *Spectrum) bandTable() *fitsutil.Table {
	unit := s.Bands[0].Unit
	get := func(of func(BandLight) float64) []float64 {
		var all []float64
		for _, b := range s.Bands {
			all = append(all, of(b))
		}
		return all
	}
	return &fitsutil.Table{Name: "BANDS", Columns: []fitsutil.Column{
		{Name: "FROM", Format: "D", Unit: "nm", Data: get(func(b BandLight) float64 { return b.FromNM })},
		{Name: "TO", Format: "D", Unit: "nm", Data: get(func(b BandLight) float64 { return b.ToNM })},
		{Name: "SIGNAL", Format: "D", Unit: unit, Data: get(func(b BandLight) float64 { return b.Signal })},
		{Name: "ERROR", Format: "D", Unit: unit, Data: get(func(b BandLight) float64 { return b.Error })},
		{Name: "NAIVE_ERROR", Format: "D", Unit: unit, Data: get(func(b BandLight) float64 { return b.Naive })},
	}}
}

// lineTable holds the fitted lines.
func (s *Spectrum) lineTable(unit string) *fitsutil.Table {
	t := &fitsutil.Table{Name: "LINES", Header: fitsutil.NewHeader(fitsutil.Card{Key: "STATUS", Value: int64(s.LineStatus), Comment: "0 fitted, 1 no data, 2 not settled, 4 faint"})}
	rest := make([]float64, len(s.Lines))
	for i := range s.Lines {
		rest[i] = s.Lines[i].RestNM
	}
	t.Columns = append(t.Columns, fitsutil.Column{Name: "REST", Format: "D", Unit: "nm", Data: rest})
	for _, v := range lineValues(unit) {
		data := make([]float64, len(s.Lines))
		for i := range s.Lines {
			data[i] = v.of(&s.Lines[i])
		}
		t.Columns = append(t.Columns, fitsutil.Column{Name: v.name, Format: "D", Unit: v.unit, Data: data})
	}
	return t
}

// covarianceImage has the axes (lag, channel).
func (s *Spectrum) covarianceImage(unit string) (*fitsutil.ImageData, error) {
	h := fitsutil.NewHeader()
	err := set(h, []card{{"BUNIT", squared(unit), "row l, column k: of channels l and l + k - 1"}})
	data := make([]float64, 0, len(s.Covariance)*(Lags+1))
	for _, row := range s.Covariance {
		data = append(data, row...)
	}
	return &fitsutil.ImageData{Name: "COVARIANCE", Header: h, Axes: []int{Lags + 1, len(s.Covariance)}, Data: data}, err
}

// WriteCSV writes spectrum.csv: a line a channel; what is not a number is empty. unit is the
// cube's.
func (s *Spectrum) WriteCSV(w io.Writer, unit string) error {
	rows := [][]string{{"wavelength (nm)", "signal (" + unit + ")", "error (" + unit + ")", "naive error (" + unit + ")", "coverage", "flags"}}
	for l, nm := range s.WavelengthNM {
		rows = append(rows, []string{number(nm), number(s.Signal[l]), number(s.Error[l]), number(s.Naive[l]), number(s.Coverage[l]), strings.Join(FlagNames(s.Flags[l]), " ")})
	}
	return writeRows(w, rows)
}

func writeRows(w io.Writer, rows [][]string) error {
	out := csv.NewWriter(w)
	if err := out.WriteAll(rows); err != nil {
		return fmt.Errorf("write a CSV file: %w", err)
	}
	return nil
}

// number has the digits that single precision deserves.
func number(x float64) string {
	if math.IsNaN(x) {
		return ""
	}
	return strconv.FormatFloat(x, 'g', 9, 64)
}
