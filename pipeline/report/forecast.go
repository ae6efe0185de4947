package report

import (
	"fmt"
	"html/template"
	"math"
	"strconv"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/product"
)

// forecastView is the forecast beside what was reached.
type forecastView struct {
	Rows  []forecastRow
	Notes []string
	Chart template.HTML
}

type forecastRow struct{ Name, Band, Forecast, Taken, Reached, Ratio, Light, Noise, Why string }

// viewForecast is nil without a forecast.
func viewForecast(f *product.Forecast) *forecastView {
	if f == nil {
		return nil
	}
	v := &forecastView{Notes: f.Notes, Chart: drawRatios(f.Wanted)}
	for _, w := range f.Wanted {
		r := forecastRow{
			Name: w.Name, Band: fmt.Sprintf("%.1f–%.1f", w.FromNM, w.ToNM), Forecast: snr(&w.Plan.SNR), Taken: snr(&w.Taken.SNR),
			Reached: snr(w.SNR), Ratio: factor(w.Ratio), Light: factor(w.LightRatio), Noise: factor(w.NoiseRatio), Why: w.Why,
		}
		if w.LightRatioError != nil {
			r.Light += fmt.Sprintf(" ± %.2f", *w.LightRatioError)
		}
		v.Rows = append(v.Rows, r)
	}
	return v
}

// snr is a signal-to-noise ratio, a dash where there is none.
func snr(x *float64) string {
	if x == nil {
		return "–"
	}
	if math.Abs(*x) >= 100 {
		return strconv.FormatFloat(*x, 'f', 0, 64)
	}
	return strconv.FormatFloat(*x, 'f', 1, 64)
}

func factor(x *float64) string {
	if x == nil {
		return "–"
	}
	return strconv.FormatFloat(*x, 'f', 2, 64)
}

// The chart of ratios: a row a measurement, so many at most.
const (
	ratioRow   = 22.0
	ratioLeft  = 170.0
	ratioRight = 20.0
	mostRatios = 30
	nameRunes  = 22
)

// drawRatios draws the S/N reached over that forecast with the standard error of the light, a
// row a measurement; "" without any.
func drawRatios(all []product.Reached) template.HTML {
	var rows []product.Reached
	low, high := 0.9, 1.1
	for _, w := range all {
		if w.Ratio == nil || len(rows) == mostRatios {
			continue
		}
		rows = append(rows, w)
		e := ratioError(w)
		low, high = math.Min(low, *w.Ratio-e), math.Max(high, *w.Ratio+e)
	}
	if len(rows) == 0 {
		return ""
	}
	low, high = math.Max(low-0.02, -1), math.Min(high+0.02, 4)
	x := func(ratio float64) float64 {
		return ratioLeft + (math.Min(math.Max(ratio, low), high)-low)/(high-low)*(chartWidth-ratioLeft-ratioRight)
	}
	bottom := 8 + ratioRow*float64(len(rows))
	var s drawing.SVG
	s.Line("axis", ratioLeft, bottom, chartWidth-ratioRight, bottom)
	s.Line("due", x(1), 4, x(1), bottom)
	for _, t := range roundTicks(low, high, 5) {
		s.Line("axis", x(t.at), bottom, x(t.at), bottom+5)
		s.Text("middle", x(t.at), bottom+23, t.words)
	}
	s.WriteString(`<g class="name">`)
	s.Text("middle", (ratioLeft+chartWidth-ratioRight)/2, bottom+47, "S/N reached / S/N forecast")
	s.WriteString("</g>")
	for i, w := range rows {
		y := 8 + ratioRow*(float64(i)+0.5)
		name := []rune(w.Name)
		if len(name) > nameRunes {
			name = append(name[:nameRunes-1], '…')
		}
		s.Text("end", ratioLeft-10, y+4, string(name))
		e := ratioError(w)
		s.Line("error", x(*w.Ratio-e), y, x(*w.Ratio+e), y)
		mark(&s, "disc", x(*w.Ratio), y, 4)
	}
	return wrapSVG("chart", "S/N reached over that forecast", chartWidth, bottom+chartBottom, s.String())
}

// ratioError is the standard error of a ratio of S/N: that of the light.
func ratioError(w product.Reached) float64 {
	if w.TimeRatio == nil || w.LightRatioError == nil || w.NoiseRatio == nil {
		return 0
	}
	return *w.LightRatioError * *w.TimeRatio / *w.NoiseRatio
}
