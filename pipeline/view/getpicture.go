package view

import (
	"bufio"
	"context"
	"encoding/binary"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"net/http"
	"slices"
	"strconv"
)

// picture is a layer of a band with its limits.
type picture struct {
	layer    layer
	from, to int
	values   []float32 // [row][element]
	limits   limits
	planes   int // of the band that were read
}

// pictureOf reads layer, from, to and sampled, and computes the picture.
func (v *Viewer) pictureOf(ctx context.Context, q *query) (*picture, error) {
	p := &picture{layer: layer(q.text("layer"))}
	if p.layer == "" {
		p.layer = layerSignal
	}
	if !slices.Contains(layers, p.layer) {
		q.fail("layer=%.40q is unknown; give one of %v", p.layer, layers)
	}
	p.from, p.to = q.band(v.schema.Grid.Count)
	quick := q.yes("sampled")
	if err := q.done(); err != nil {
		return nil, badQuery{err}
	}
	err := v.compute(ctx, func() error {
		s, planes, err := v.band(ctx, p.from, p.to, p.layer == layerScale, quick)
		if err != nil {
			return err
		}
		p.planes, p.values = planes, s.values(p.layer)
		return nil
	})
	p.limits = limitsOf(p.values)
	return p, err
}

// getPicture answers float32, little-endian, row by row.
func (v *Viewer) getPicture(w http.ResponseWriter, r *http.Request, q *query) error {
	p, err := v.pictureOf(r.Context(), q)
	if err != nil {
		return err
	}
	raw := make([]byte, 4*len(p.values))
	for i, x := range p.values {
		binary.LittleEndian.PutUint32(raw[4*i:], math.Float32bits(x))
	}
	h := w.Header()
	h.Set("Content-Type", "application/octet-stream")
	h.Set("Content-Length", strconv.Itoa(len(raw)))
	h.Set("X-Min", figure(p.limits.min))
	h.Set("X-Max", figure(p.limits.max))
	h.Set("X-Low", figure(p.limits.low))
	h.Set("X-High", figure(p.limits.high))
	h.Set("X-Unit", p.layer.unit(v.unit))
	h.Set("X-Planes", fmt.Sprintf("%d of %d", p.planes, p.to-p.from+1))
	_, _ = w.Write(raw) // a reader that has gone away is no error of ours
	return nil
}

func figure(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }

// getPicturePNG answers the picture in grey between low and high, rows upwards and pixels
// as nearly square on the sky as whole numbers allow; no value is transparent.
func (v *Viewer) getPicturePNG(w http.ResponseWriter, r *http.Request, q *query) error {
	low, high := q.numberOr("low", math.NaN()), q.numberOr("high", math.NaN())
	if low >= high {
		q.fail("low must lie below high")
	}
	p, err := v.pictureOf(r.Context(), q)
	if err != nil {
		return err
	}
	low, high = finiteOr(low, p.limits.low), finiteOr(high, p.limits.high)
	h := w.Header()
	h.Set("Content-Type", "image/png")
	h.Set("Content-Disposition", fmt.Sprintf("attachment; filename=%q", v.fileName(p, "png")))
	_ = png.Encode(w, v.draw(p.values, low, high)) // a reader that has gone away is no error of ours
	return nil
}

// fileName that an export gets.
func (v *Viewer) fileName(p *picture, kind string) string {
	return fmt.Sprintf("%s-%d-%d.%s", p.layer, p.from, p.to, kind)
}

// mostTimes a voxel is repeated in a picture.
const mostTimes = 16

func (v *Viewer) draw(values []float32, low, high float64) *image.NRGBA {
	n, rows := v.schema.Elements, v.schema.Rows
	across, along := 1, 1
	if ratio := v.schema.C1Deg / v.schema.C2Deg; ratio >= 1 {
		across = min(int(ratio+0.5), mostTimes)
	} else {
		along = min(int(1/ratio+0.5), mostTimes)
	}
	im := image.NewNRGBA(image.Rect(0, 0, n*across, rows*along))
	for y := range rows * along {
		for x := range n * across {
			value := float64(values[(rows-1-y/along)*n+x/across])
			if value != value {
				continue
			}
			grey := uint8(255*min(max((value-low)/(high-low), 0), 1) + 0.5)
			im.SetNRGBA(x, y, color.NRGBA{grey, grey, grey, 255})
		}
	}
	return im
}

// getPictureCSV answers a line a place; no value is empty.
func (v *Viewer) getPictureCSV(w http.ResponseWriter, r *http.Request, q *query) error {
	p, err := v.pictureOf(r.Context(), q)
	if err != nil {
		return err
	}
	h := w.Header()
	h.Set("Content-Type", "text/csv; charset=utf-8")
	h.Set("Content-Disposition", fmt.Sprintf("attachment; filename=%q", v.fileName(p, "csv")))
	out := bufio.NewWriter(w)
	name := string(p.layer)
	if unit := p.layer.unit(v.unit); unit != "" {
		name += " (" + unit + ")"
	}
	fmt.Fprintf(out, "element,row,%s\n", name) // bufio keeps errors to Flush
	for i, x := range p.values {
		text := ""
		if x == x {
			text = strconv.FormatFloat(float64(x), 'g', -1, 32)
		}
		fmt.Fprintf(out, "%d,%d,%s\n", i%v.schema.Elements, i/v.schema.Elements, text)
	}
	_ = out.Flush() // a reader that has gone away is no error of ours
	return nil
}
