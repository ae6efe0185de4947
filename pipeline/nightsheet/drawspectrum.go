package nightsheet

import (
	"fmt"
	"html/template"
	"math"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/forecast"
)

// spectrumHeight is that of the drawings of S/N along the wavelengths, spectraDrawn how many
// stand beside each other.
const (
	spectrumHeight = 78
	spectraDrawn   = 3
)

// drawSpectra draws the S/N of a voxel along the wavelengths, of the first measurements that
// have any, beside each other.
func (l *layout) drawSpectra(width float64) template.HTML {
	f := l.sheet.Forecast
	var s drawing.SVG
	fmt.Fprintf(&s, `<svg class="drawing" role="img" aria-label="S/N along the wavelengths" viewBox="0 0 %s %d" style="width:%spt;height:%dpt">`, coord(width), spectrumHeight, coord(width), spectrumHeight)
	const gap = 14
	each := (width - gap*(spectraDrawn-1)) / spectraDrawn
	place := 0
	for i := range f.Wanted {
		m := &f.Wanted[i]
		if len(m.Spectrum) < 2 || place == spectraDrawn {
			continue
		}
		var slit []forecast.Channel
		if f.Slit != nil {
			slit = f.Slit.Wanted[i].Spectrum
		}
		p := panel{labels: l, left: float64(place)*(each+gap) + 26, right: float64(place)*(each+gap) + each - 8, top: 14, bottom: spectrumHeight - 13}
		p.draw(&s, l.bold.Fit(label(i)+" "+m.Name, labelPoints, each), m.Spectrum, slit)
		place++
	}
	s.WriteString("</svg>")
	return template.HTML(s.String())
}

// hasSpectra tells whether there is anything to draw.
func hasSpectra(f *forecast.Result) bool {
	for i := range f.Wanted {
		if len(f.Wanted[i].Spectrum) > 1 {
			return true
		}
	}
	return false
}

// panel is a drawing of curves over wavelength.
type panel struct {
	labels                   *layout
	left, right, top, bottom float64
}

func (p *panel) draw(s *drawing.SVG, title string, plan, slit []forecast.Channel) {
	first, last := plan[0].WavelengthNM, plan[len(plan)-1].WavelengthNM
	most := 0.0
	for _, list := range [][]forecast.Channel{plan, slit} {
		for _, c := range list {
			most = max(most, c.VoxelSNR)
		}
	}
	if most == 0 {
		most = 1
	}
	x := func(nm float64) float64 { return p.left + (nm-first)/(last-first)*(p.right-p.left) }
	y := func(v float64) float64 { return p.bottom - v/(1.08*most)*(p.bottom-p.top) }
	step := drawing.RoundStep(most / 2)
	for i := 0.0; i*step <= most*1.08; i++ {
		s.Line("grid", p.left, y(i*step), p.right, y(i*step))
		s.Text("end", p.left-3, y(i*step)+2.6, number(i*step))
	}
	nm := drawing.RoundStep((last - first) / 2)
	for i := math.Ceil(first / nm); i*nm <= last; i++ {
		s.Line("tick", x(i*nm), p.bottom, x(i*nm), p.bottom+3)
		text := number(math.Round(i*nm*1e4) / 1e4)
		if nm < 1 || i*nm >= 1000 {
			text = fmt.Sprintf("%.*f", max(0, int(-math.Floor(math.Log10(nm)))), i*nm)
		}
		if half := p.labels.regular.Width(text, labelPoints) / 2; x(i*nm)-half > p.left-8 && x(i*nm)+half < p.right+8 {
			s.Text("middle", x(i*nm), p.bottom+10, text)
		}
	}
	s.WriteString(`<g class="strong">`)
	s.Text("start", p.left-26, 7, title)
	s.WriteString("</g>")
	for _, c := range []struct {
		class string
		list  []forecast.Channel
	}{{"dashed", slit}, {"curve", plan}} {
		if len(c.list) < 2 {
			continue
		}
		fmt.Fprintf(s, `<path class="%s" d="`, c.class)
		for i, at := range c.list {
			fmt.Fprintf(s, "%c%s,%s", "ML"[min(i, 1)], coord(x(at.WavelengthNM)), coord(y(at.VoxelSNR)))
		}
		s.WriteString(`"/>`)
	}
}
