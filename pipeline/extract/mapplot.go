package extract

import (
	"image"
	"image/color"
	"io"
	"math"
	"slices"

	"gonum.org/v1/plot"
	"gonum.org/v1/plot/plotter"
	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
)

// The shades of a map run between these quantiles of its values.
const lowQuantile, highQuantile = 0.01, 0.99

// mapWidth is that of a map's picture; its height follows the field's.
const mapWidth = 6 * vg.Inch

// drawMap draws an image of elements and rows in shades of grey as PNG, arc seconds
// along both axes from the field's centre, with arrows to the north and to the east. Pixels
// without a value have a colour that no shade has, which a key explains.
func (c *Cube) drawMap(w io.Writer, values []float32, title string) (err error) {
	defer draws("a map", &err)
	low, high := shades(values)
	picture := image.NewNRGBA(image.Rect(0, 0, c.Elements, c.Rows))
	for i, v := range values {
		if isNaN(v) {
			picture.Set(i%c.Elements, c.Rows-1-i/c.Elements, noData)
			continue
		}
		t := min(max((float64(v)-low)/(high-low), 0), 1)
		picture.Set(i%c.Elements, c.Rows-1-i/c.Elements, color.NRGBA{R: grey(t), G: grey(t), B: grey(t), A: 0xff})
	}
	stepX, stepY := c.sky.steps()
	left, right := (-0.5-c.sky.refX)*stepX, (float64(c.Elements)-0.5-c.sky.refX)*stepX
	bottom, top := (-0.5-c.sky.refY)*stepY, (float64(c.Rows)-0.5-c.sky.refY)*stepY
	p := newPlot("along the elements (arcsec)", "along the rows (arcsec)")
	p.Title.Text = title + ", " + number(roundTo3(low)) + " white to " + number(roundTo3(high)) + " black"
	p.Title.TextStyle.Font.Variant = "Sans"
	p.Add(plotter.NewImage(picture, left, bottom, right, top))
	p.X.Tick.Marker, p.Y.Tick.Marker = plot.DefaultTicks{}, plot.DefaultTicks{}
	height := vg.Length(float64(mapWidth-vg.Inch)*(top-bottom)/(right-left)) + vg.Inch
	height = min(max(height, 2*vg.Inch), 12*vg.Inch)
	canvas := vgimg.New(mapWidth+margin, height)
	whole := draw.New(canvas)
	p.Draw(draw.Crop(whole, 0, -margin, 0, 0))
	c.sky.drawMargin(draw.Crop(whole, mapWidth, 0, 0, 0))
	_, err = vgimg.PngCanvas{Canvas: canvas}.WriteTo(w)
	return err
}

// grey is dark for bright values: sky stays the colour of paper.
func grey(t float64) uint8 { return uint8(math.Round(245 * (1 - t))) }

func roundTo3(x float64) float64 {
	if x == 0 {
		return 0
	}
	unit := math.Pow(10, math.Floor(math.Log10(math.Abs(x)))-2)
	return math.Round(x/unit) * unit
}

// shades are the values between which a map is drawn.
func shades(values []float32) (low, high float64) {
	var all []float64
	for _, v := range values {
		if !isNaN(v) {
			all = append(all, float64(v))
		}
	}
	if len(all) == 0 {
		return 0, 1
	}
	slices.Sort(all)
	low, high = all[int(lowQuantile*float64(len(all)-1))], all[int(highQuantile*float64(len(all)-1))]
	if !(high > low) {
		high = low + 1
	}
	return low, high
}

// steps are the sizes of a voxel on the sky, arc seconds.
func (s *sky) steps() (x, y float64) {
	return math.Hypot(s.cd[0][0], s.cd[1][0]) * arcsecPerDeg, math.Hypot(s.cd[0][1], s.cd[1][1]) * arcsecPerDeg
}
