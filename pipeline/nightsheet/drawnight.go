package nightsheet

import (
	"fmt"
	"html/template"
	"math"
	"time"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/sequence"
)

// nightHeight is that of the drawing of the night.
const nightHeight = 84

// drawNight draws the night over time: airmass above, what is exposed below.
func (l *layout) drawNight(width float64) template.HTML {
	const left, right, top, bottom, barTop, barBottom = 32, 6, 8, 44, 49, 61
	var s drawing.SVG
	total := l.sheet.seconds()
	x := func(seconds float64) float64 { return left + seconds/total*(width-left-right) }
	fmt.Fprintf(&s, `<svg class="drawing" role="img" aria-label="The night" viewBox="0 0 %s %d" style="width:%spt;height:%dpt">`, coord(width), nightHeight, coord(width), nightHeight)
	most := 1.1 // flatter is flat
	for _, a := range l.sheet.Sky {
		most = max(most, a.Airmass)
	}
	most = min(most, 4) // beyond, nothing is read off
	// Airmass runs downwards, as the target does in the sky.
	y := func(airmass float64) float64 { return top + (airmass-1)/(most-1)*(bottom-top) }
	for _, a := range []float64{1, most} {
		s.Line("grid", left, y(a), width-right, y(a))
		s.Text("end", left-3, y(a)+2.6, fmt.Sprintf("%.2f", a))
	}
	s.Text("start", 0, (top+bottom)/2+2.6, "airmass")
	path := ""
	for _, a := range l.sheet.Sky {
		if a.Airmass == 0 || a.Airmass > most {
			path += " "
			continue
		}
		step := "L"
		if path == "" || path[len(path)-1] == ' ' {
			step = "M"
		}
		path += step + coord(x(a.seconds)) + "," + coord(y(a.Airmass))
	}
	fmt.Fprintf(&s, `<path class="curve" d="%s"/>`, path)
	for _, r := range runsOf(l.sheet.sequence, l.sheet.Steps, nightRuns) {
		s.Rect("kind "+string(r.Kind), x(r.begin), barTop, max(x(r.end)-x(r.begin), 0.6), barBottom-barTop)
	}
	l.hours(&s, x, barBottom, width-right)
	l.kindKey(&s, left, nightHeight-3)
	s.WriteString("</svg>")
	return template.HTML(s.String())
}

// hours writes the time below the bar, at round times.
func (l *layout) hours(s *drawing.SVG, x func(seconds float64) float64, y, end float64) {
	start, err := time.Parse(time.RFC3339, l.sheet.StartUTC)
	if err != nil {
		return
	}
	total := l.sheet.seconds()
	step := 60.0
	for _, minutes := range []float64{1, 2, 5, 10, 15, 30, 60, 120, 240, 480, 1440, 2880, 7200, 14400, 43200} {
		if step = 60 * minutes; total/step <= 7 {
			break
		}
	}
	format := "15:04"
	if step >= 24*3600 {
		format = "Jan 2"
	}
	day := start.Truncate(24 * time.Hour)
	for at := math.Ceil(start.Sub(day).Seconds()/step) * step; at <= start.Sub(day).Seconds()+total; at += step {
		px := x(at - start.Sub(day).Seconds())
		s.Line("tick", px, y, px, y+3)
		if px < end-10 && px > 44 {
			s.Text("middle", px, y+10, day.Add(time.Duration(at)*time.Second).Format(format))
		}
	}
	s.Text("start", 0, y+10, "UTC")
}

// kindKey names the shades of the bar.
func (l *layout) kindKey(s *drawing.SVG, x, y float64) {
	for _, k := range sequence.Kinds() {
		if len(l.sheet.sequence.StepsOf(k)) == 0 || k == sequence.AllOff {
			continue
		}
		text := string(k)
		if k == sequence.Science && len(l.sheet.sequence.StepsOf(sequence.AllOff)) > 0 {
			text = "science, all-off"
		}
		s.Rect("kind "+string(k), x, y-6, 8, 6)
		s.Text("start", x+10.5, y, text)
		x += 18 + l.regular.Width(text, labelPoints)
	}
}
