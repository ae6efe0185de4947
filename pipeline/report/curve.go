package report

import (
	"fmt"
	"html/template"
	"image/color"
	"math"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"

	"mirrorloom/pipeline/product"
)

// Curve is the throughput of the frames by one method.
type Curve struct {
	Method string
	// Minutes are the middles of the exposures since that of the first frame; C is the
	// throughput and Err its standard error, +Inf or NaN where a frame was not measured.
	Minutes, C, Err []float64
}

// known keeps the frames that were measured.
func (c *Curve) known() *points {
	p := new(points)
	for i, sigma := range c.Err {
		if !math.IsNaN(c.C[i]) && !math.IsNaN(sigma) && !math.IsInf(sigma, 0) {
			p.XYs = append(p.XYs, plotter.XY{X: c.Minutes[i], Y: c.C[i]})
			p.YErrors = append(p.YErrors, struct{ Low, High float64 }{sigma, sigma})
		}
	}
	return p
}

type points struct {
	plotter.XYs
	plotter.YErrors
}

// curveStyles tell methods apart without colour: a dark dot, a light ring, a light
// triangle.
var curveStyles = []struct {
	tone  color.Gray
	shape draw.GlyphDrawer
}{
	{ink, draw.CircleGlyph{}},
	{color.Gray{Y: 0x70}, draw.RingGlyph{}},
	{color.Gray{Y: 0x90}, draw.TriangleGlyph{}},
	{color.Gray{Y: 0x50}, draw.SquareGlyph{}},
}

// drawCurves draws the throughput against time with its standard errors; "" without a
// measured frame.
func drawCurves(curves []Curve) (chart template.HTML, err error) {
	defer func() { // the library panics on what it cannot draw
		if r := recover(); r != nil {
			chart, err = "", fmt.Errorf("chart of the throughput: %v", r)
		}
	}()
	p := plot.New()
	p.BackgroundColor = color.White
	for _, axis := range []*plot.Axis{&p.X, &p.Y} {
		for _, style := range []*text.Style{&axis.Label.TextStyle, &axis.Tick.Label} {
			style.Font.Variant, style.Font.Size, style.Color = "Sans", chartFont, ink
		}
		axis.Color, axis.Tick.Color = rule, rule
		axis.Tick.Marker = plot.TickerFunc(roundTicks)
	}
	p.X.Label.Text, p.Y.Label.Text = "minutes since the first science frame", "throughput"
	p.Legend.TextStyle.Font.Variant, p.Legend.TextStyle.Font.Size = "Sans", chartFont
	p.Legend.Top = true
	drawn := 0
	for i, c := range curves {
		k := c.known()
		if k.Len() == 0 {
			continue
		}
		style := curveStyles[i%len(curveStyles)]
		bars, err := plotter.NewYErrorBars(k)
		if err != nil {
			return "", fmt.Errorf("chart of the throughput: %w", err)
		}
		bars.Color, bars.Width, bars.CapWidth = style.tone, vg.Points(0.6), 0
		dots, err := plotter.NewScatter(k)
		if err != nil {
			return "", fmt.Errorf("chart of the throughput: %w", err)
		}
		dots.Color, dots.Radius, dots.Shape = style.tone, vg.Points(1.6), style.shape
		p.Add(bars, dots)
		p.Legend.Add(c.Method, dots)
		drawn++
	}
	if drawn == 0 {
		return "", nil
	}
	if p.X.Max <= p.X.Min {
		p.X.Max = p.X.Min + 1
	}
	if p.Y.Max <= p.Y.Min {
		p.Y.Max = p.Y.Min + 0.01
	}
	svg, err := render(p, 0)
	if err != nil {
		return "", err
	}
	return labelled(svg, "Throughput of the frames with errors"), nil
}

// addThroughput shows the curve and what was found with it.
func (p *page) addThroughput(in Input) (err error) {
	if in.Run.Throughput == nil {
		return nil
	}
	p.ThroughputFacts = throughputFacts(in.Run.Throughput)
	p.Throughput, err = drawCurves(in.Throughput)
	return err
}

// throughputFacts tells what each method and step gained.
func throughputFacts(t *product.Throughput) []fact {
	var all []fact
	add := func(name, format string, args ...any) { all = append(all, fact{name, fmt.Sprintf(format, args...)}) }
	for _, m := range t.Methods {
		use := fmt.Sprintf("%.0f %% of the information", 100*m.Share)
		if !m.Used {
			use = "not used"
		}
		add("By "+m.Name, "%s rms, error of a frame %s; %s", percent(m.RMS), percent(m.Error), use)
	}
	for _, m := range t.Terms {
		add("Corrected apart: "+m.Name, "%s rms, error of a frame %s", percent(m.RMS), percent(m.Error))
	}
	for _, h := range t.HeldOut {
		kept := "kept"
		if !h.Kept {
			kept = "not kept"
		}
		add("Held-out chi-square of dark columns, "+h.Step, "from %.3f to %.3f; %s", h.Before, h.After, kept)
	}
	if o := t.Offset; o != nil {
		add("Levels taken off the frames, rms", "%.3f e, error of one %.3f e", o.Value, o.Error)
	}
	if l := t.Leak; l != nil {
		add("Light of closed mirrors, against the all-off frames", "%.4f ± %.4f", l.Value, l.Error)
	}
	if i := t.Image; i != nil {
		add("Motion of the sentinel's image, rms", "%.4f px along the dispersion (error %.4f), %.4f px along the slit (%.4f); width %.2f %% (%.2f %%)",
			i.XPx.Value, i.XPx.Error, i.YPx.Value, i.YPx.Error, 100*i.FWHMPart.Value, 100*i.FWHMPart.Error)
		add("Slope of the sentinel's flux over the band, rms", "%.2f %% (error of a frame %.2f %%)", 100*i.Slope.Value, 100*i.Slope.Error)
	}
	return all
}
