package extract

import (
	"image/color"
	"math"

	"gonum.org/v1/plot/font"
	"gonum.org/v1/plot/text"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
)

// noData is the colour of places without a value: no grey.
var noData = color.NRGBA{R: 0xe3, G: 0xc9, B: 0xa3, A: 0xff}

// margin is the width of the strip beside a map, for its arrows and its key.
const margin = 1.1 * vg.Inch

// towards is the direction on a map, whose axes are arc seconds along elements and rows, of
// an offset to the east and to the north; of length 1.
func (s *sky) towards(east, north float64) (x, y float64) {
	const small = 1.0 / arcsecPerDeg
	j0, y0 := s.voxel(0, 0)
	j1, y1 := s.voxel(east*small, north*small)
	stepX, stepY := s.steps()
	x, y = (j1-j0)*stepX, (y1-y0)*stepY
	r := math.Hypot(x, y)
	return x / r, y / r
}

// drawMargin draws the arrows and the key of places without a value.
func (s *sky) drawMargin(c draw.Canvas) {
	const arm, side, room = 0.3 * vg.Inch, 0.14 * vg.Inch, 0.12 * vg.Inch
	middle := vg.Point{X: (c.Min.X + c.Max.X) / 2, Y: c.Max.Y - 0.8*vg.Inch}
	for _, a := range []struct {
		name        string
		east, north float64
	}{{"N", 0, 1}, {"E", 1, 0}} {
		x, y := s.towards(a.east, a.north)
		drawArrow(c, middle, x, y, arm)
		label := vg.Point{X: middle.X + vg.Length(x)*(arm+room), Y: middle.Y + vg.Length(y)*(arm+room)}
		c.FillText(marginStyle(draw.XCenter, draw.YCenter), label, a.name)
	}
	corner := vg.Point{X: c.Min.X + room, Y: c.Min.Y + 0.6*vg.Inch}
	c.FillPolygon(noData, []vg.Point{corner, {X: corner.X + side, Y: corner.Y}, {X: corner.X + side, Y: corner.Y + side}, {X: corner.X, Y: corner.Y + side}})
	c.FillText(marginStyle(draw.XLeft, draw.YCenter), vg.Point{X: corner.X + side + room/2, Y: corner.Y + side/2}, "no data")
}

// drawArrow draws an arrow from a point in a direction of length 1.
func drawArrow(c draw.Canvas, from vg.Point, x, y float64, arm vg.Length) {
	const barb, opening = 0.08 * vg.Inch, 0.4 // of its length
	line := draw.LineStyle{Color: ink, Width: vg.Points(1)}
	tip := vg.Point{X: from.X + vg.Length(x)*arm, Y: from.Y + vg.Length(y)*arm}
	c.StrokeLine2(line, from.X, from.Y, tip.X, tip.Y)
	for _, side := range []float64{-1, 1} {
		bx, by := -x-side*opening*y, -y+side*opening*x
		c.StrokeLine2(line, tip.X, tip.Y, tip.X+vg.Length(bx)*barb, tip.Y+vg.Length(by)*barb)
	}
}

func marginStyle(x draw.XAlignment, y draw.YAlignment) text.Style {
	f := font.From(font.Font{Typeface: "Liberation", Variant: "Sans"}, 10)
	return text.Style{Color: ink, Font: f, XAlign: x, YAlign: y, Handler: text.Plain{Fonts: font.DefaultCache}}
}
