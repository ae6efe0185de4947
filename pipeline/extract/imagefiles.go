package extract

import (
	"context"
	"fmt"
	"io"
	"path/filepath"

	"mirrorloom/fitsutil"
)

// Names of the products of a narrow-band image.
const (
	ImageFITS = "band.fits"
	ImageCSV  = "band.csv"
	ImagePlot = "band.png"
)

// ImageAnswer sums up a narrow-band image.
type ImageAnswer struct {
	FromNM float64 `json:"from_nm"`
	ToNM   float64 `json:"to_nm"`
	Unit   string  `json:"unit"`
	// Pixels have a value; ErrorOverNaive is the median of error over naive error.
	Pixels         int     `json:"pixels"`
	MedianSN       float64 `json:"median_sn"`
	ErrorOverNaive float64 `json:"error_over_naive"`
}

func (c *Cube) runImage(ctx context.Context, opts Options) (*ImageAnswer, error) {
	im, err := c.Image(ctx, *opts.Image, func(done int) { opts.Progress("image", done, c.Rows) })
	if err != nil {
		return nil, err
	}
	if err := c.writeImage(opts.Out, im); err != nil {
		return nil, err
	}
	a := &ImageAnswer{FromNM: im.Band.FromNM, ToNM: im.Band.ToNM, Unit: im.Unit}
	var sn, ratio []float64
	for i, v := range im.Signal {
		if e := float64(im.Error[i]); !isNaN(v) && e > 0 {
			a.Pixels++
			sn, ratio = append(sn, float64(v)/e), append(ratio, e/float64(im.Naive[i]))
		}
	}
	a.MedianSN, a.ErrorOverNaive = median(sn), median(ratio)
	return a, nil
}

// imageHeader gives the celestial coordinates of an image of elements and rows, and
// its unit where it is not empty.
func (c *Cube) imageHeader(unit string) (*fitsutil.Header, error) {
	h := fitsutil.NewHeader()
	var cards []card
	if unit != "" {
		cards = append(cards, card{"BUNIT", unit, "unit of the pixel values"})
	}
	cards = append(cards, card{"WCSAXES", 2, "world coordinate axes"})
	for _, key := range []string{"CTYPE1", "CTYPE2", "CUNIT1", "CUNIT2", "CRPIX1", "CRPIX2", "CRVAL1", "CRVAL2", "CD1_1", "CD1_2", "CD2_1", "CD2_2", "RADESYS"} {
		for _, k := range c.signal.Header.Cards() {
			if k.Key == key {
				cards = append(cards, card{key, k.Value, k.Comment})
			}
		}
	}
	return h, set(h, cards)
}

func (c *Cube) writeImage(dir string, im *Image) error {
	cards := []card{{"BANDFROM", im.Band.FromNM, "nm in vacuum"}, {"BANDTO", im.Band.ToNM, "nm in vacuum"}}
	for i, r := range im.Band.Sides {
		cards = append(cards, card{fmt.Sprintf("SIDE%dA", i+1), r[0], "continuum from, nm"}, card{fmt.Sprintf("SIDE%dB", i+1), r[1], "to"})
	}
	primary, err := c.primary(cards...)
	if err != nil {
		return err
	}
	var hdus []any
	for _, layer := range []struct {
		name, unit string
		data       any
	}{
		{"SIGNAL", im.Unit, im.Signal}, {"ERROR", im.Unit, im.Error}, {"NAIVE_ERROR", im.Unit, im.Naive},
		{"COVERAGE", "", im.Coverage}, {"FLAGS", "", im.Flags},
	} {
		h, err := c.imageHeader(layer.unit)
		if err != nil {
			return err
		}
		hdus = append(hdus, &fitsutil.ImageData{Name: layer.name, Header: h, Axes: []int{im.Elements, im.Rows}, Data: layer.data})
	}
	if err := fitsutil.WriteFile(filepath.Join(dir, ImageFITS), primary, hdus...); err != nil {
		return err
	}
	if err := fitsutil.WriteAtomic(filepath.Join(dir, ImageCSV), func(w io.Writer) error { return c.imageCSV(w, im) }); err != nil {
		return err
	}
	if !hasValues(im.Signal) {
		return nil
	}
	return fitsutil.WriteAtomic(filepath.Join(dir, ImagePlot), func(w io.Writer) error {
		return c.drawMap(w, im.Signal, fmt.Sprintf("light of %g to %g nm (%s)", im.Band.FromNM, im.Band.ToNM, im.Unit))
	})
}

// imageCSV writes a line for each pixel with a value.
func (c *Cube) imageCSV(w io.Writer, im *Image) error {
	rows := [][]string{{"element", "row", "ra (deg)", "dec (deg)", "signal (" + im.Unit + ")", "error (" + im.Unit + ")", "naive error (" + im.Unit + ")", "coverage"}}
	for i, v := range im.Signal {
		if isNaN(v) {
			continue
		}
		rows = append(rows, append(c.placeFields(i), number(float64(v)), number(float64(im.Error[i])), number(float64(im.Naive[i])), number(float64(im.Coverage[i]))))
	}
	return writeRows(w, rows)
}

// placeFields are element, row and position of pixel i of an image.
func (c *Cube) placeFields(i int) []string {
	j, y := i%c.Elements, i/c.Elements
	p := c.Position(float64(j), float64(y))
	return []string{fmt.Sprint(j), fmt.Sprint(y), fmt.Sprintf("%.7f", p.RADeg), fmt.Sprintf("%.7f", p.DecDeg)}
}
