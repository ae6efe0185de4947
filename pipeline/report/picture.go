package report

import (
	"bytes"
	"encoding/base64"
	"fmt"
	"html/template"
	"image"
	"image/color"
	"image/png"
	"math"
	"slices"

	"mirrorloom/pipeline/drawing"
)

// The layout of the picture, in units of its view box.
const (
	pictureWidth = 560
	plotLeft     = 54
	plotTop      = 12
	plotMost     = 392 // the longer side of the field
	plotLeast    = 60  // what its labels need
	sideGap      = 14
	sideWidth    = pictureWidth - plotLeft - plotMost - sideGap // compass and scale bar
	sideHeight   = 160
	maxPixels    = 800 // of the bitmap's sides: a finer one shows no more
	greys        = 255
)

// stretch maps white light to 0..1 by an inverse hyperbolic sine, which shows
// faint light and the brightest star at once.
type stretch struct{ low, high, soft float64 }

// Between these quantiles of the field the stretch runs; below and above it
// stays at its ends. It is linear up to some widths of the field's own spread
// (noise and faint light), logarithmic beyond, and never bends below a
// thousandth of the range.
const (
	lowQuantile  = 0.02
	highQuantile = 0.9995
	softSpreads  = 4
	softLeast    = 1e-3
)

func stretchOf(values []float64) (stretch, bool) {
	sorted := slices.DeleteFunc(slices.Clone(values), math.IsNaN)
	if len(sorted) == 0 {
		return stretch{}, false
	}
	slices.Sort(sorted)
	at := func(q float64) float64 { return sorted[int(math.Round(q*float64(len(sorted)-1)))] }
	s := stretch{low: at(lowQuantile), high: at(highQuantile)}
	if s.high <= s.low {
		s.high = s.low + 1
	}
	spread := at(0.5) - at(0.16) // one standard deviation of Gaussian noise
	s.soft = max(softSpreads*spread, softLeast*(s.high-s.low))
	return s, true
}

func (s stretch) at(v float64) float64 {
	return min(1, max(0, math.Asinh((v-s.low)/s.soft)/math.Asinh((s.high-s.low)/s.soft)))
}

// inverse gives the value that is shown as t.
func (s stretch) inverse(t float64) float64 {
	return s.low + s.soft*math.Sinh(t*math.Asinh((s.high-s.low)/s.soft))
}

// drawPicture draws the white light, darker where it is brighter, as on a
// photographic negative: that prints well and is read without colours.
func drawPicture(w *Light, sky skyPlane, places []place) (template.HTML, error) {
	st, ok := stretchOf(w.mean)
	if !ok {
		return "", nil
	}
	data, err := bitmap(w, st)
	if err != nil {
		return "", err
	}
	width, height := float64(w.elements)*sky.stepX, float64(w.rows)*sky.stepY // arc seconds
	scale := plotMost / max(width, height)
	f := frame{w: w, left: plotLeft, top: plotTop, width: width * scale, height: height * scale}
	var s drawing.SVG
	below := plotTop + max(f.height, sideHeight)
	side := f.left + max(f.width, plotLeast) + sideGap + sideWidth/2.0
	fmt.Fprintf(&s, `<svg class="picture" viewBox="0 0 %d %s" role="img" aria-label="White-light picture of the field" xmlns="http://www.w3.org/2000/svg">`, pictureWidth, drawing.Coord(below+96))
	s.WriteString(`<defs><pattern id="nodata" width="6" height="6" patternUnits="userSpaceOnUse"><path d="M0,6L6,0" class="hatch"/></pattern></defs>`)
	fmt.Fprintf(&s, `<rect fill="url(#nodata)" x="%s" y="%s" width="%s" height="%s"/>`, drawing.Coord(f.left), drawing.Coord(f.top), drawing.Coord(f.width), drawing.Coord(f.height))
	fmt.Fprintf(&s, `<image href="data:image/png;base64,%s" x="%s" y="%s" width="%s" height="%s" preserveAspectRatio="none"/>`,
		base64.StdEncoding.EncodeToString(data), drawing.Coord(f.left), drawing.Coord(f.top), drawing.Coord(f.width), drawing.Coord(f.height))
	f.axes(&s)
	for _, p := range places {
		f.mark(&s, p)
	}
	drawCompass(&s, sky, side, plotTop+56)
	drawScaleBar(&s, scale, side, plotTop+132)
	drawLegend(&s, st, below+56)
	s.WriteString("</svg>")
	return template.HTML(s.String()), nil
}

// frame is where the field lies in the drawing.
type frame struct {
	w                        *Light
	left, top, width, height float64
}

// at gives the point of a place's centre.
func (f frame) at(element, row float64) (x, y float64) {
	return f.left + (element+0.5)/float64(f.w.elements)*f.width, f.top + f.height - (row+0.5)/float64(f.w.rows)*f.height
}

func (f frame) axes(s *drawing.SVG) {
	s.Rect("frame", f.left, f.top, f.width, f.height)
	bottom := f.top + f.height
	// As many ticks as their labels leave room for.
	for _, i := range drawing.Ticks(f.w.elements-1, max(1, int(f.width/55))) {
		x, _ := f.at(float64(i), 0)
		s.Line("tick", x, bottom, x, bottom+5)
		s.Text("middle", x, bottom+19, fmt.Sprint(i))
	}
	for _, i := range drawing.Ticks(f.w.rows-1, max(1, int(f.height/45))) {
		_, y := f.at(0, float64(i))
		s.Line("tick", f.left-5, y, f.left, y)
		s.Text("end", f.left-8, y+4, fmt.Sprint(i))
	}
	s.Text("middle", f.left+max(f.width, plotLeast)/2, bottom+36, "element")
	s.Turned(f.left-40, f.top+max(f.height/2, plotLeast*2/3), "detector row")
}

// mark rings a place and writes its label beside it.
func (f frame) mark(s *drawing.SVG, p place) {
	const radius = 10
	x, y := f.at(float64(p.element), float64(p.row))
	for _, class := range []string{"halo", "ring"} {
		fmt.Fprintf(s, `<circle class="%s" cx="%s" cy="%s" r="%d"/>`, class, drawing.Coord(x), drawing.Coord(y), radius)
	}
	anchor, beside := "start", x+radius+3
	if beside > f.left+f.width-12 {
		anchor, beside = "end", x-radius-3
	}
	s.WriteString(`<g class="label">`)
	s.Text(anchor, beside, y+5, p.label)
	s.WriteString("</g>")
}

// drawCompass draws the arrows of north and east about a centre.
func drawCompass(s *drawing.SVG, sky skyPlane, x, y float64) {
	const length, beyond = 30, 41
	for _, arm := range []struct {
		class, word string
		east, north float64
	}{{"north", "N", 0, 1}, {"east", "E", 1, 0}} {
		dx, dy := sky.direction(arm.east, arm.north)
		s.Arrow(arm.class, x, y, dx, -dy, length) // the drawing's y runs downwards
		s.Text("middle", x+dx*beyond, y-dy*beyond+5, arm.word)
	}
}

// drawScaleBar draws a bar of a round number of arc seconds; scale is in units
// per arc second.
func drawScaleBar(s *drawing.SVG, scale, x, y float64) {
	arcsec := drawing.RoundStep((sideWidth - 8) / scale)
	half := arcsec * scale / 2
	s.Line("bar", x-half, y, x+half, y)
	s.Line("bar", x-half, y-5, x-half, y+5)
	s.Line("bar", x+half, y-5, x+half, y+5)
	s.Text("middle", x, y+20, fmt.Sprintf("%g″", arcsec))
}

// drawLegend draws the grey scale with its values.
func drawLegend(s *drawing.SVG, st stretch, y float64) {
	const steps, height = 64, 12
	for i := range steps {
		grey := shade(uint8(math.Round(1 + float64(i)/(steps-1)*(greys-1))))
		fmt.Fprintf(s, `<rect x="%s" y="%s" width="%s" height="%d" fill="#%02x%02x%02x"/>`,
			drawing.Coord(plotLeft+float64(i)*plotMost/steps), drawing.Coord(y), drawing.Coord(plotMost/steps+0.5), height, grey, grey, grey)
	}
	s.Rect("frame", plotLeft, y, plotMost, height)
	for _, t := range []float64{0, 0.25, 0.5, 0.75, 1} {
		x := plotLeft + t*plotMost
		s.Line("tick", x, y+height, x, y+height+4)
		s.Text("middle", x, y+height+17, figure(st.inverse(t)))
	}
}

// shade is the grey of a bitmap index from 1 (faint, near white) to 255 (black).
func shade(index uint8) uint8 {
	return uint8(math.Round(250 - 250*(float64(index)-1)/(greys-1)))
}

// bitmap gives the white light as a PNG, the first row at the bottom. Index 0 is
// transparent: no good voxel.
func bitmap(w *Light, st stretch) ([]byte, error) {
	palette := color.Palette{color.NRGBA{}}
	for i := 1; i <= greys; i++ {
		palette = append(palette, color.Gray{Y: shade(uint8(i))})
	}
	binX, binY := (w.elements+maxPixels-1)/maxPixels, (w.rows+maxPixels-1)/maxPixels
	im := image.NewPaletted(image.Rect(0, 0, (w.elements+binX-1)/binX, (w.rows+binY-1)/binY), palette)
	height := im.Rect.Dy()
	for y := range height {
		for x := range im.Rect.Dx() {
			if v := w.binned(x*binX, y*binY, binX, binY); !math.IsNaN(v) {
				im.SetColorIndex(x, height-1-y, uint8(1+math.Round(st.at(v)*(greys-1))))
			}
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, im); err != nil {
		return nil, fmt.Errorf("white-light picture: %w", err)
	}
	return b.Bytes(), nil
}

// binned is the mean of a block of places, NaN if none of them has a good voxel.
func (w *Light) binned(x0, y0, nx, ny int) float64 {
	sum, n := 0.0, 0
	for y := y0; y < min(y0+ny, w.rows); y++ {
		for x := x0; x < min(x0+nx, w.elements); x++ {
			if v := w.mean[y*w.elements+x]; !math.IsNaN(v) {
				sum += v
				n++
			}
		}
	}
	return sum / float64(n)
}
