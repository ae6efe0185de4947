package report

import (
	"bytes"
	"fmt"
	"html/template"
	"image/color"
	"math"
	"strings"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/instrument"
)

// The size of a chart, in units of its view box.
const (
	chartWidth  = 480
	chartHeight = 176
	chartFont   = 12
)

var (
	ink  = color.Gray{Y: 0x20}
	band = color.Gray{Y: 0xc4}
	rule = color.Gray{Y: 0x90}
)

// drawSpectra draws each spectrum over vacuum wavelength with a band of one
// standard error on both sides; voxels that are not good leave a gap. The
// wavelengths of all charts lie below each other. A spectrum without two good
// voxels gives an empty chart ("").
func drawSpectra(spectra []*spectrum, grid instrument.Grid, unit string) (charts []template.HTML, err error) {
	defer func() { // the library panics on what it cannot draw
		if r := recover(); r != nil {
			charts, err = nil, fmt.Errorf("chart of a spectrum: %v", r)
		}
	}()
	plots := make([]*plot.Plot, len(spectra))
	var left vg.Length // of the widest vertical axis
	for i, s := range spectra {
		if s.good < 2 {
			continue
		}
		if plots[i], err = plotSpectrum(s, grid, unit); err != nil {
			return nil, fmt.Errorf("chart of a spectrum: %w", err)
		}
		left = max(left, leftOf(plots[i]))
	}
	for _, p := range plots {
		chart := template.HTML("")
		if p != nil {
			if chart, err = render(p, left-leftOf(p)); err != nil {
				return nil, err
			}
		}
		charts = append(charts, chart)
	}
	return charts, nil
}

// leftOf is the width of a chart's vertical axis with its labels.
func leftOf(p *plot.Plot) vg.Length {
	return p.DataCanvas(draw.New(vgsvg.New(chartWidth, chartHeight))).Min.X
}

// render draws a chart, indented from the left.
func render(p *plot.Plot, indent vg.Length) (template.HTML, error) {
	canvas := vgsvg.New(chartWidth, chartHeight)
	p.Draw(draw.Crop(draw.New(canvas), indent, 0, 0, 0))
	var b bytes.Buffer
	if _, err := canvas.WriteTo(&b); err != nil {
		return "", fmt.Errorf("chart of a spectrum: %w", err)
	}
	return inline(b.Bytes())
}

func plotSpectrum(s *spectrum, grid instrument.Grid, unit string) (*plot.Plot, error) {
	p := newChart(grid, unit)
	for _, run := range s.runs() {
		if err := addRun(p, s, grid, run[0], run[1]); err != nil {
			return nil, err
		}
	}
	p.X.Min, p.X.Max = grid.WavelengthNM(0), grid.LastNM()
	p.Y.Min, p.Y.Max = s.yRange()
	return p, nil
}

func newChart(grid instrument.Grid, unit string) *plot.Plot {
	p := plot.New()
	p.BackgroundColor = color.White
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		for _, style := range []*text.Style{&axis.Label.TextStyle, &axis.Tick.Label} {
			style.Font.Variant, style.Font.Size, style.Color = "Sans", chartFont, ink
		}
		axis.Color, axis.Tick.Color = rule, rule
	}
	p.X.Label.Text, p.Y.Label.Text = "vacuum wavelength (nm)", unit
	p.X.Padding = 4
	p.Y.Tick.Marker = plot.TickerFunc(roundTicks)
	zero := plotter.NewFunction(func(float64) float64 { return 0 })
	zero.Color, zero.Width, zero.Samples = rule, vg.Points(0.6), 2
	zero.XMin, zero.XMax = grid.WavelengthNM(0), grid.LastNM()
	p.Add(zero)
	return p
}

// roundTicks puts three to six labelled ticks at round numbers.
func roundTicks(low, high float64) []plot.Tick {
	step := drawing.RoundStep((high - low) / 3)
	var all []plot.Tick
	for i := math.Ceil(low / step); i*step <= high; i++ {
		all = append(all, plot.Tick{Value: i * step, Label: figure(i * step)})
	}
	return all
}

// labelled replaces what a chart is called where it cannot be seen.
func labelled(chart template.HTML, label string) template.HTML {
	return template.HTML(strings.Replace(string(chart), spectrumLabel, label, 1))
}

const spectrumLabel = "Spectrum with errors"

// runs gives the stretches of good voxels, first and last inclusive.
func (s *spectrum) runs() [][2]int {
	var runs [][2]int
	for i := range s.signal {
		switch {
		case math.IsNaN(s.signal[i]):
		case i > 0 && !math.IsNaN(s.signal[i-1]):
			runs[len(runs)-1][1] = i
		default:
			runs = append(runs, [2]int{i, i})
		}
	}
	return runs
}

// addRun draws voxels first..last: the band below, the line above it. A single
// voxel is drawn as wide as it is.
func addRun(p *plot.Plot, s *spectrum, grid instrument.Grid, first, last int) error {
	var middle, upper, lower plotter.XYs
	add := func(at float64, i int) {
		x := grid.WavelengthNM(at)
		middle = append(middle, plotter.XY{X: x, Y: s.signal[i]})
		upper = append(upper, plotter.XY{X: x, Y: s.signal[i] + s.sigma[i]})
		lower = append(lower, plotter.XY{X: x, Y: s.signal[i] - s.sigma[i]})
	}
	if first == last {
		add(float64(first)-0.5, first)
		add(float64(first)+0.5, first)
	} else {
		for i := first; i <= last; i++ {
			add(float64(i), i)
		}
	}
	for i := len(lower) - 1; i >= 0; i-- {
		upper = append(upper, lower[i])
	}
	area, err := plotter.NewPolygon(upper)
	if err != nil {
		return err
	}
	area.Color, area.LineStyle.Width = band, 0
	line, err := plotter.NewLine(middle)
	if err != nil {
		return err
	}
	line.Color, line.Width = ink, vg.Points(1)
	p.Add(area, line)
	return nil
}

// yRange spans the bands and zero, with some air.
func (s *spectrum) yRange() (low, high float64) {
	for i, v := range s.signal {
		if !math.IsNaN(v) {
			low, high = min(low, v-s.sigma[i]), max(high, v+s.sigma[i])
		}
	}
	if high <= low {
		high = low + 1
	}
	air := 0.04 * (high - low)
	return low - air, high + air
}

// inline takes off what only a file of its own needs (the XML declaration and
// comments) and the fixed size.
func inline(file []byte) (template.HTML, error) {
	start := bytes.Index(file, []byte("<svg"))
	box := bytes.Index(file, []byte("viewBox="))
	if start < 0 || box < start {
		return "", fmt.Errorf("internal error: a chart is no SVG with a view box")
	}
	return template.HTML(`<svg class="chart" role="img" aria-label="` + spectrumLabel + `" ` + string(file[box:])), nil
}
