package nightsheet

import (
	"fmt"
	"html/template"
	"math"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/forecast"
)

// The layout of the S/N's drawing, points.
const (
	snrRow    = 12.5
	snrHead   = 13
	snrFoot   = 14
	snrLeft   = 190
	snrRight  = 200
	snrColumn = 33.3
)

// snrHeight is that of a drawing of n measurements.
func snrHeight(n int) float64 { return snrHead + snrFoot + snrRow*float64(n) }

// drawSNR draws the S/N of the first n measurements, the plan's and that of the slit scan of
// equal time, over a logarithmic scale, with the figures and where the noise comes from.
func (l *layout) drawSNR(width float64, n int) template.HTML {
	f := l.sheet.Forecast
	var s drawing.SVG
	height := snrHeight(n)
	fmt.Fprintf(&s, `<svg class="drawing" role="img" aria-label="S/N of what is wanted" viewBox="0 0 %s %s" style="width:%spt;height:%spt">`, coord(width), coord(height), coord(width), coord(height))
	low, high := l.snrRange(n)
	x := func(v float64) float64 {
		return snrLeft + math.Log(max(v, low)/low)/math.Log(high/low)*(width-snrLeft-snrRight-20)
	}
	bottom := height - snrFoot
	lastLabel := math.Inf(-1)
	for _, t := range logTicks(low, high) {
		s.Line("grid", x(t), snrHead, x(t), bottom)
		if half := l.regular.Width(number(t), labelPoints) / 2; x(t)-half > lastLabel+4 {
			s.Text("middle", x(t), height-4, number(t))
			lastLabel = x(t) + half
		}
	}
	s.Text("start", 0, height-4, "S/N, logarithmic: ● plan, ○ slit scan in the same time")
	columns := []string{"plan", "slit", "ratio", "photons", "detector", "other"}
	for i, c := range columns {
		s.Text("end", width-snrColumn*float64(len(columns)-1-i), 8, c)
	}
	for i := range n {
		y := snrHead + snrRow*(float64(i)+0.5)
		m := &f.Wanted[i]
		var slit *forecast.Measure
		if f.Slit != nil {
			slit = &f.Slit.Wanted[i]
		}
		s.Line("grid", 0, y+snrRow/2, width, y+snrRow/2)
		l.snrLine(&s, m, i, y)
		for k, text := range snrFigures(m, slit) {
			s.Text("end", width-snrColumn*float64(len(columns)-1-k), y+2.6, text)
		}
		if slit != nil && slit.SNR > 0 {
			s.Line("between", x(slit.SNR), y, x(m.SNR), y)
			fmt.Fprintf(&s, `<circle class="open" cx="%s" cy="%s" r="3.2"/>`, coord(x(slit.SNR)), coord(y))
		}
		if m.SNR > 0 {
			fmt.Fprintf(&s, `<circle class="full" cx="%s" cy="%s" r="2.6"/>`, coord(x(m.SNR)), coord(y))
		}
	}
	s.WriteString("</svg>")
	return template.HTML(s.String())
}

// snrLine writes a measurement's letter, name and wavelengths.
func (l *layout) snrLine(s *drawing.SVG, m *forecast.Measure, i int, y float64) {
	at := fmt.Sprintf("%.1f–%.1f nm", m.FromNM, m.ToNM)
	if m.Line {
		at = fmt.Sprintf("line %.2f nm", (m.FromNM+m.ToNM)/2)
	}
	room := snrLeft - 12 - l.regular.Width(at, labelPoints)
	s.WriteString(`<g class="strong">`)
	s.Text("start", 0, y+2.6, l.bold.Fit(label(i)+" "+m.Name, labelPoints, room-4))
	s.WriteString("</g>")
	s.Text("end", snrLeft-8, y+2.6, at)
}

// snrFigures are the columns beside the drawing.
func snrFigures(m, slit *forecast.Measure) []string {
	percent := func(x float64) string { return fmt.Sprintf("%.0f %%", math.Round(100*x)+0) }
	if m.Voxels == 0 {
		return []string{"not seen"}
	}
	v := m.Variance
	list := []string{snr(m.SNR), "–", "–", percent(v.Photons), percent(v.Detector), percent(max(0, 1-v.Photons-v.Detector))}
	if slit != nil && slit.SNR > 0 {
		list[1], list[2] = snr(slit.SNR), fmt.Sprintf("%.2f", m.SNR/slit.SNR)
	}
	return list
}

// mostRange is that of the scale: what is fainter stands at its end.
const mostRange = 1e5

// snrRange spans all of them, by more than a factor of 2.
func (l *layout) snrRange(n int) (low, high float64) {
	low, high = math.Inf(1), 0
	take := func(x float64) {
		if x > 0 {
			low, high = min(low, x), max(high, x)
		}
	}
	for i := range n {
		take(l.sheet.Forecast.Wanted[i].SNR)
		if s := l.sheet.Forecast.Slit; s != nil {
			take(s.Wanted[i].SNR)
		}
	}
	if high == 0 {
		return 1, 10
	}
	return max(low/1.5, high/mostRange), high * 1.5
}

// logTicks are 1, 2 and 5 times powers of ten within a range; powers alone where that is wide.
func logTicks(low, high float64) []float64 {
	steps := []float64{1, 2, 5}
	if high/low > 1e4 {
		steps = steps[:1]
	}
	var list []float64
	for p := math.Floor(math.Log10(low)); p <= math.Log10(high); p++ {
		for _, f := range steps {
			if t := f * math.Pow(10, p); t >= low && t <= high {
				list = append(list, t)
			}
		}
	}
	return list
}
