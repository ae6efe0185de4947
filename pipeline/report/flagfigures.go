package report

import (
	"bytes"
	"fmt"
	"html/template"
	"image"
	"image/color"
	"image/png"
	"math"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/instrument"
)

// drawBadMap draws the part of each place's wavelengths that is not good.
func drawBadMap(w *Light, sky skyPlane) (template.HTML, error) {
	palette := make(color.Palette, 256)
	for i := range palette {
		palette[i] = color.Gray{Y: uint8(255 - i)}
	}
	binX, binY := (w.elements+maxPixels-1)/maxPixels, (w.rows+maxPixels-1)/maxPixels
	im := image.NewPaletted(image.Rect(0, 0, (w.elements+binX-1)/binX, (w.rows+binY-1)/binY), palette)
	height := im.Rect.Dy()
	for y := range height {
		for x := range im.Rect.Dx() {
			good, n := 0, 0
			for row := y * binY; row < min((y+1)*binY, w.rows); row++ {
				for j := x * binX; j < min((x+1)*binX, w.elements); j++ {
					good += int(w.good[row*w.elements+j])
					n += w.planes
				}
			}
			im.SetColorIndex(x, height-1-y, uint8(math.Round(255*(1-float64(good)/float64(n)))))
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, im); err != nil {
		return "", fmt.Errorf("map of the flags: %w", err)
	}
	f := frameOf(w.elements, w.rows, sky)
	f.top = chartTop
	var s drawing.SVG
	f.image(&s, "flags", b.Bytes())
	f.axes(&s)
	bottom := f.top + f.height + 62
	const steps = 46
	for i := range steps {
		level := 255 - 255*i/(steps-1)
		fmt.Fprintf(&s, `<rect x="%s" y="%s" width="%s" height="10" fill="#%02x%02x%02x"/>`, drawing.Coord(plotLeft+float64(i)*legendWidth/steps), drawing.Coord(bottom), drawing.Coord(legendWidth/steps+0.5), level, level, level)
	}
	s.Rect("frame", plotLeft, bottom, legendWidth, 10)
	for _, percent := range []float64{0, 50, 100} {
		x := plotLeft + percent/100*legendWidth
		s.Line("tick", x, bottom+10, x, bottom+14)
		s.Text("middle", x, bottom+28, fmt.Sprintf("%g %%", percent))
	}
	return wrapSVG("picture", "Voxels that are not good, by place", pictureWidth, bottom+36, s.String()), nil
}

// A flag is drawn over wavelength where it lies on this part of the voxels somewhere.
const leastFlagged = 0.002

// lineClasses tell the flags apart without colours.
var lineClasses = []string{"line", "line dashed", "line dotted", "line thick"}

// flagSeries is a flag over wavelength.
type flagSeries struct {
	name  string
	share []float64 // percent
}

// drawFlagSpectrum draws how many voxels have each flag, over wavelength; "" without any.
func drawFlagSpectrum(s *survey, grid instrument.Grid) template.HTML {
	var all []flagSeries
	most := 0.0
	for i, f := range allFlags {
		one := flagSeries{name: f.Name}
		peak := 0.0
		for _, part := range s.flagged[i] {
			one.share = append(one.share, 100*part)
			peak = max(peak, part)
		}
		if peak >= leastFlagged && len(all) < len(lineClasses) {
			all = append(all, one)
			most = max(most, 100*peak)
		}
	}
	if len(all) == 0 {
		return ""
	}
	n := len(s.sky)
	nm := make([]float64, n)
	for l := range nm {
		nm[l] = grid.WavelengthNM(float64(l))
	}
	c := newChart("Flags over wavelength", "vacuum wavelength, nm", "voxels with the flag, %", nm[0], nm[n-1], 0, 1.05*most)
	c.axes()
	x := c.left
	for i, f := range all {
		c.path(lineClasses[i], nm, f.share, math.Abs(grid.StepNM))
		c.Line(lineClasses[i], x, c.bottom+chartBottom+4, x+24, c.bottom+chartBottom+4)
		c.Text("start", x+30, c.bottom+chartBottom+8, f.name)
		x += 128
	}
	c.height = c.bottom + chartBottom + 16
	return c.done()
}
