package extract

import (
	"fmt"
	"image/color"
	"io"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"
)

var (
	ink  = color.Gray{Y: 0x20}
	band = color.Gray{Y: 0xc8}
)

// draws turns the panics of the plotting library into an error.
func draws(what string, err *error) {
	if r := recover(); r != nil {
		*err = fmt.Errorf("plot of %s: %v", what, r)
	}
}

// newPlot is an empty plot in the house's style.
func newPlot(x, y string) *plot.Plot {
	p := plot.New()
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		for _, style := range []*text.Style{&axis.Label.TextStyle, &axis.Tick.Label} {
			style.Font.Variant, style.Color = "Sans", ink
		}
	}
	p.X.Label.Text, p.Y.Label.Text = x, y
	return p
}

// plot draws the spectrum, a band of one standard error on both sides of it, as SVG.
// Channels without a value leave a gap.
func (s *Spectrum) plot(w io.Writer, unit string) (err error) {
	defer draws("a spectrum", &err)
	p := newPlot("vacuum wavelength (nm)", "signal ("+unit+")")
	for from := 0; from < len(s.Signal); {
		to := from
		for to < len(s.Signal) && !math.IsNaN(s.Signal[to]) && !math.IsNaN(s.Error[to]) {
			to++
		}
		if to > from+1 {
			if err := s.addRun(p, from, to); err != nil {
				return err
			}
		}
		from = to + 1
	}
	canvas := vgsvg.New(8*vg.Inch, 3.5*vg.Inch)
	p.Draw(draw.New(canvas))
	_, err = canvas.WriteTo(w)
	return err
}

func (s *Spectrum) addRun(p *plot.Plot, from, to int) error {
	var middle, outline, lower plotter.XYs
	for l := from; l < to; l++ {
		x := s.WavelengthNM[l]
		middle = append(middle, plotter.XY{X: x, Y: s.Signal[l]})
		outline = append(outline, plotter.XY{X: x, Y: s.Signal[l] + s.Error[l]})
		lower = append(lower, plotter.XY{X: x, Y: s.Signal[l] - s.Error[l]})
	}
	for i := range lower {
		outline = append(outline, lower[len(lower)-1-i])
	}
	area, err := plotter.NewPolygon(outline)
	if err != nil {
		return fmt.Errorf("plot of a spectrum: %w", err)
	}
	area.Color, area.LineStyle.Width = band, 0
	line, err := plotter.NewLine(middle)
	if err != nil {
		return fmt.Errorf("plot of a spectrum: %w", err)
	}
	line.Color, line.Width = ink, vg.Points(0.8)
	p.Add(area, line)
	return nil
}
