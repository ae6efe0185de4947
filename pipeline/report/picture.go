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

// The layout of a picture, in units of its view box.
const (
	pictureWidth = 560
	plotLeft     = 64
	plotTop      = 30  // room for right ascensions
	plotMost     = 384 // the longer side of the field
	plotLeast    = 60  // what its labels need
	legendWidth  = 230
	barMost      = 110 // the scale bar
	maxPixels    = 800 // of the bitmap's sides: a finer one shows no more
	greys        = 255
	labelRoom    = 96 // between right ascensions
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

// picture is light by place, to be drawn.
type picture struct {
	values         []float64 // [row][element]; NaN where there is none
	elements, rows int
	label          string // what it shows, where it cannot be seen
	unit           string
	id             string // of its own on the page
}

// draw draws a picture, darker where it is brighter, as on a photographic negative: that
// prints well and is read without colours. "" without any value.
func (p picture) draw(sky skyPlane, places []place) (template.HTML, error) {
	st, ok := stretchOf(p.values)
	if !ok {
		return "", nil
	}
	data, err := p.bitmap(st)
	if err != nil {
		return "", err
	}
	f := frameOf(p.elements, p.rows, sky)
	var s drawing.SVG
	f.image(&s, p.id, data)
	grid := skyGrid(sky, p.elements, p.rows)
	for _, l := range grid {
		f.gridLine(&s, l)
	}
	f.gridWords(&s, grid)
	f.axes(&s)
	for _, at := range places {
		f.mark(&s, at)
	}
	below := f.top + f.height + 78
	drawLegend(&s, st, p.unit, below)
	drawScaleBar(&s, f.scale, plotLeft+legendWidth+80, below+8)
	drawCompass(&s, sky, pictureWidth-58, below+4)
	return wrapSVG("picture", p.label, pictureWidth, below+48, s.String()), nil
}

// frameOf lays a field out so that arc seconds are square.
func frameOf(elements, rows int, sky skyPlane) frame {
	width, height := float64(elements)*sky.stepX, float64(rows)*sky.stepY // arc seconds
	scale := plotMost / max(width, height)
	return frame{elements: elements, rows: rows, left: plotLeft, top: plotTop, width: width * scale, height: height * scale, scale: scale}
}

// image puts a bitmap into the frame, hatched where it is transparent.
func (f frame) image(s *drawing.SVG, id string, data []byte) {
	fmt.Fprintf(s, `<defs><pattern id="nodata-%s" width="6" height="6" patternUnits="userSpaceOnUse"><path d="M0,6L6,0" class="hatch"/></pattern></defs>`, id)
	fmt.Fprintf(s, `<rect fill="url(#nodata-%s)" x="%s" y="%s" width="%s" height="%s"/>`, id, drawing.Coord(f.left), drawing.Coord(f.top), drawing.Coord(f.width), drawing.Coord(f.height))
	fmt.Fprintf(s, `<image href="data:image/png;base64,%s" x="%s" y="%s" width="%s" height="%s" preserveAspectRatio="none"/>`,
		base64.StdEncoding.EncodeToString(data), drawing.Coord(f.left), drawing.Coord(f.top), drawing.Coord(f.width), drawing.Coord(f.height))
}

// gridLine draws a line of the sky.
func (f frame) gridLine(s *drawing.SVG, l gridLine) {
	class := "meridian"
	if l.dec {
		class = "parallel"
	}
	fmt.Fprintf(s, `<path class="%s" d="`, class)
	command := "M"
	for _, p := range l.points {
		x, y := f.at(p[0], p[1])
		fmt.Fprintf(s, "%s%s,%s", command, drawing.Coord(x), drawing.Coord(y))
		command = "L"
	}
	fmt.Fprintf(s, `"><title>%s</title></path>`, l.words)
}

// gridWords names the lines where they leave the field: right ascensions above it and
// declinations at its right, or the other way round where the field is turned. What would
// cover another name is left out.
func (f frame) gridWords(s *drawing.SVG, lines []gridLine) {
	var above, right []float64
	free := func(taken []float64, at, room float64) bool {
		return !slices.ContainsFunc(taken, func(t float64) bool { return math.Abs(t-at) < room })
	}
	onTop := func(l gridLine) bool {
		for _, p := range [][2]float64{l.points[0], l.points[len(l.points)-1]} {
			x, y := f.at(p[0], p[1])
			if math.Abs(y-f.top) < 0.6 && x > f.left-0.6 && free(above, x, labelRoom) {
				s.Text("middle", x, f.top-8, l.words)
				above = append(above, x)
				return true
			}
		}
		return false
	}
	atRight := func(l gridLine) bool {
		for _, p := range [][2]float64{l.points[0], l.points[len(l.points)-1]} {
			x, y := f.at(p[0], p[1])
			if math.Abs(x-f.left-f.width) < 0.6 && free(right, y, 18) {
				s.Text("start", f.left+f.width+6, y+4, l.words)
				right = append(right, y)
				return true
			}
		}
		return false
	}
	for _, l := range lines {
		if len(l.points) < 2 {
			continue
		}
		if l.dec {
			_ = atRight(l) || onTop(l)
		} else {
			_ = onTop(l) || atRight(l)
		}
	}
}

// frame is where the field lies in the drawing.
type frame struct {
	elements, rows           int
	left, top, width, height float64
	scale                    float64 // units per arc second
}

// at gives the point of a place's centre.
func (f frame) at(element, row float64) (x, y float64) {
	return f.left + (element+0.5)/float64(f.elements)*f.width, f.top + f.height - (row+0.5)/float64(f.rows)*f.height
}

func (f frame) axes(s *drawing.SVG) {
	s.Rect("frame", f.left, f.top, f.width, f.height)
	bottom := f.top + f.height
	// As many ticks as their labels leave room for.
	for _, i := range drawing.Ticks(f.elements-1, max(1, int(f.width/55))) {
		x, _ := f.at(float64(i), 0)
		s.Line("tick", x, bottom, x, bottom+5)
		s.Text("middle", x, bottom+19, fmt.Sprint(i))
	}
	for _, i := range drawing.Ticks(f.rows-1, max(1, int(f.height/45))) {
		_, y := f.at(0, float64(i))
		s.Line("tick", f.left-5, y, f.left, y)
		s.Text("end", f.left-8, y+4, fmt.Sprint(i))
	}
	s.WriteString(`<g class="name">`)
	s.Text("middle", f.left+max(f.width, plotLeast)/2, bottom+36, "element")
	s.Turned(f.left-46, f.top+max(f.height/2, plotLeast*2/3), "detector row")
	s.WriteString("</g>")
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
	const length, beyond = 24, 34
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
	arcsec := drawing.RoundStep(barMost / scale)
	half := arcsec * scale / 2
	s.Line("bar", x-half, y, x+half, y)
	s.Line("bar", x-half, y-5, x-half, y+5)
	s.Line("bar", x+half, y-5, x+half, y+5)
	s.Text("middle", x, y+20, fmt.Sprintf("%g″", arcsec))
}

// drawLegend draws the grey scale with its values.
func drawLegend(s *drawing.SVG, st stretch, unit string, y float64) {
	const steps, height = 46, 10
	for i := range steps {
		grey := shade(uint8(math.Round(1 + float64(i)/(steps-1)*(greys-1))))
		fmt.Fprintf(s, `<rect x="%s" y="%s" width="%s" height="%d" fill="#%02x%02x%02x"/>`,
			drawing.Coord(plotLeft+float64(i)*legendWidth/steps), drawing.Coord(y), drawing.Coord(legendWidth/steps+0.5), height, grey, grey, grey)
	}
	s.Rect("frame", plotLeft, y, legendWidth, height)
	for _, t := range []float64{0, 0.5, 1} {
		x := plotLeft + t*legendWidth
		s.Line("tick", x, y+height, x, y+height+4)
		s.Text("middle", x, y+height+18, figure(st.inverse(t)))
	}
	s.WriteString(`<g class="name">`)
	s.Text("start", plotLeft, y-8, unit)
	s.WriteString("</g>")
}

// shade is the grey of a bitmap index from 1 (faint, near white) to 255 (black).
func shade(index uint8) uint8 {
	return uint8(math.Round(250 - 250*(float64(index)-1)/(greys-1)))
}

// bitmap gives the picture as a PNG, the first row at the bottom. Index 0 is transparent:
// no value.
func (p picture) bitmap(st stretch) ([]byte, error) {
	palette := color.Palette{color.NRGBA{}}
	for i := 1; i <= greys; i++ {
		palette = append(palette, color.Gray{Y: shade(uint8(i))})
	}
	binX, binY := (p.elements+maxPixels-1)/maxPixels, (p.rows+maxPixels-1)/maxPixels
	im := image.NewPaletted(image.Rect(0, 0, (p.elements+binX-1)/binX, (p.rows+binY-1)/binY), palette)
	height := im.Rect.Dy()
	for y := range height {
		for x := range im.Rect.Dx() {
			if v := p.binned(x*binX, y*binY, binX, binY); !math.IsNaN(v) {
				im.SetColorIndex(x, height-1-y, uint8(1+math.Round(st.at(v)*(greys-1))))
			}
		}
	}
	var b bytes.Buffer
	if err := png.Encode(&b, im); err != nil {
		return nil, fmt.Errorf("picture of %s: %w", p.label, err)
	}
	return b.Bytes(), nil
}

// binned is the mean of a block of places, NaN if none of them has a value.
func (p picture) binned(x0, y0, nx, ny int) float64 {
	sum, n := 0.0, 0
	for y := y0; y < min(y0+ny, p.rows); y++ {
		for x := x0; x < min(x0+nx, p.elements); x++ {
			if v := p.values[y*p.elements+x]; !math.IsNaN(v) {
				sum += v
				n++
			}
		}
	}
	return sum / float64(n)
}
