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
	poor = color.NRGBA{R: 0xc8, G: 0x6a, B: 0x1e, A: 0xff}
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

// poorCoverage is the good part of an aperture below which a plot marks a channel: what is
// missing is made up for by scaling, which a source's profile need not obey.
const poorCoverage = 0.9

// plot draws the spectrum, a band of one standard error on both sides of it, as SVG.
// Channels without a value leave a gap; those of which less than poorCoverage is good have a
// mark at the bottom.
func (s *Spectrum) plot(w io.Writer, title, unit string) (err error) {
	defer draws("a spectrum", &err)
	p := newPlot("vacuum wavelength (nm)", "signal ("+unit+")")
	p.Title.Text, p.Title.TextStyle.Font.Variant = title, "Sans"
	p.Title.Padding = vg.Points(4)
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
	if p.Y.Min > 0 && p.Y.Min < zeroBelow*p.Y.Max {
		p.Y.Min = 0
	}
	if err := s.markPoor(p); err != nil {
		return err
	}
	canvas := vgsvg.New(8*vg.Inch, 3.5*vg.Inch)
	p.Draw(draw.New(canvas))
	_, err = canvas.WriteTo(w)
	return err
}

// zeroBelow is the part of the highest value below which the lowest is near enough to 0 for the
// axis to begin there.
const zeroBelow = 0.6

// keyRoom is the part of the axis that the key takes above the spectrum.
const keyRoom = 0.15

// markPoor draws a bar along the bottom where the aperture is poorly covered, with a key.
func (s *Spectrum) markPoor(p *plot.Plot) error {
	var key *plotter.Line
	for from := 0; from < len(s.Signal); from++ {
		to := from
		for to < len(s.Signal) && s.Coverage[to] < poorCoverage {
			to++
		}
		if to == from {
			continue
		}
		half := math.Abs(s.WavelengthNM[1]-s.WavelengthNM[0]) / 2
		bar, err := plotter.NewLine(plotter.XYs{{X: s.WavelengthNM[from] - half, Y: p.Y.Min}, {X: s.WavelengthNM[to-1] + half, Y: p.Y.Min}})
		if err != nil {
			return fmt.Errorf("plot of a spectrum: %w", err)
		}
		bar.Color, bar.Width = poor, vg.Points(4)
		p.Add(bar)
		key, from = bar, to
	}
	if key != nil {
		p.Legend.Add(fmt.Sprintf("less than %.0f %% of the aperture is good", 100*poorCoverage), key)
		p.Legend.Top, p.Legend.Left, p.Legend.TextStyle.Font.Variant = true, true, "Sans"
		p.Legend.XOffs = vg.Points(10)
		p.Y.Max += keyRoom * (p.Y.Max - p.Y.Min)
	}
	return nil
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
