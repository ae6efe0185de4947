package trade

import (
	"fmt"
	"image/color"
	"io"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgsvg"
)

// mostDrawn rows are drawn.
const mostDrawn = 24

var (
	ink     = color.Gray{Y: 0x20}
	codeBar = color.Gray{Y: 0xb4}
	slitBar = color.RGBA{R: 0x3a, G: 0x6e, B: 0xa5, A: 0xff}
	ownBar  = color.RGBA{R: 0xc8, G: 0x7a, B: 0x2e, A: 0xff}
)

// WritePlot draws the S/N of the rows within the limits as bars, the best on top: slit scans
// in blue, the one that is planned in orange, a line at the best slit scan. As SVG.
func (t *Trade) WritePlot(w io.Writer) (err error) {
	defer func() { // the plotting library panics where a font lacks
		if r := recover(); r != nil {
			err = fmt.Errorf("plot of the candidates: %v", r)
		}
	}()
	drawn := t.drawn()
	p := plot.New()
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		for _, style := range []*text.Style{&axis.Label.TextStyle, &axis.Tick.Label} {
			style.Font.Variant, style.Color = "Sans", ink
		}
	}
	p.X.Label.Text = "S/N of " + t.aim() + " in " + seconds(t.BudgetSeconds)
	var names []string
	kinds := map[color.Color]plotter.Values{}
	shades := []color.Color{codeBar, slitBar, ownBar}
	for _, shade := range shades {
		kinds[shade] = make(plotter.Values, len(drawn))
	}
	slit, longest := 0.0, 0.0
	for i := range drawn {
		r := drawn[len(drawn)-1-i] // the first lies lowest
		shade := color.Color(codeBar)
		switch {
		case r.Chosen || r.Given:
			shade = ownBar
		case r.IsSlit():
			shade = slitBar
		}
		if r.IsSlit() {
			slit = max(slit, r.Figure)
		}
		kinds[shade][i] = r.Figure
		longest = max(longest, r.Figure)
		names = append(names, r.label())
	}
	for _, shade := range shades {
		bars, err := plotter.NewBarChart(kinds[shade], vg.Points(9))
		if err != nil {
			return fmt.Errorf("plot of the candidates: %w", err)
		}
		bars.Horizontal, bars.Color, bars.LineStyle.Width = true, shade, 0
		p.Add(bars)
	}
	if slit > 0 {
		line, err := plotter.NewLine(plotter.XYs{{X: slit, Y: -0.5}, {X: slit, Y: float64(len(drawn)) - 0.5}})
		if err != nil {
			return fmt.Errorf("plot of the candidates: %w", err)
		}
		line.Color, line.Width = slitBar, vg.Points(1)
		p.Add(line)
	}
	p.NominalY(names...)
	// Room at the bars' ends, and half a row above the first and below the last.
	p.X.Min, p.X.Max = 0, 1.04*max(longest, 1e-9)
	p.Y.Min, p.Y.Max = -0.9, float64(len(drawn))-0.1
	// With its font inside, since a reader's other one may be wider than the room for it.
	canvas := vgsvg.NewWith(vgsvg.UseWH(8*vg.Inch, vg.Points(70+14*float64(len(drawn)))), vgsvg.EmbedFonts(true))
	// The widths of the library's font are a little less than the drawn ones.
	const margin = 0.35
	p.Draw(draw.Crop(draw.New(canvas), margin*vg.Inch, -vg.Points(8), vg.Points(4), -vg.Points(4)))
	_, err = canvas.WriteTo(w)
	return err
}

// drawn are the rows of the plot: the best, the given one and slit scans.
func (t *Trade) drawn() []*Row {
	var list []*Row
	for i := range t.Rows {
		r := &t.Rows[i]
		keep := r.Given || r.Chosen || r.Breaks == "" && (i < mostDrawn || r.IsSlit())
		if keep {
			list = append(list, r)
		}
	}
	return list
}

func (r *Row) label() string {
	c := r.Candidate
	name := fmt.Sprintf("%s %d", c.Family, c.V)
	if !r.IsSlit() {
		name += fmt.Sprintf(", %d dark", c.Dark)
	}
	name += fmt.Sprintf(", %d wide", c.ElementMirrors)
	if len(r.Covered) > 0 {
		name += fmt.Sprint(", closed ", r.Covered)
	}
	return name
}
