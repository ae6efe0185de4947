package report

import (
	"context"
	"math"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// cube is an open cube.fits.
type cube struct {
	file                    *fitsutil.File
	signal, variance, flags *fitsutil.Image
}

func openCube(path string) (*cube, error) {
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	c := &cube{file: file}
	for _, im := range []struct {
		name string
		to   **fitsutil.Image
	}{{product.Signal, &c.signal}, {product.Variance, &c.variance}, {product.FlagsImage, &c.flags}} {
		if *im.to, err = file.ImageNamed(im.name); err == nil && c.signal != *im.to && !slices.Equal(c.signal.Axes, (*im.to).Axes) {
			err = &fitsutil.Error{File: path, HDU: (*im.to).HDU, Offset: -1, What: "the image has other axes than " + product.Signal,
				Cure: "make the cube again with reduce", Err: fitsutil.ErrStructure}
		}
		if err != nil {
			file.Close() // only read from
			return nil, err
		}
	}
	return c, nil
}

func (c *cube) elements() int { return c.signal.Width() }
func (c *cube) rows() int     { return c.signal.Height() }

// unitWord names the unit of SIGNAL for the axis of a chart.
func (c *cube) unitWord() string {
	unit, err := c.signal.Header.Str("BUNIT")
	switch {
	case err != nil:
		return "signal"
	case unit == product.UnitSignal: // a count is an electron, see UnitSignal
		return "electrons"
	}
	return unit
}

// flagShare is a flag with the part of the voxels that have it.
type flagShare struct {
	Name  string
	Bit   int16
	Share string
	Bad   bool
}

func (w *Light) flagShares() []flagShare {
	var shares []flagShare
	total := float64(w.elements*w.rows) * float64(w.planes)
	for i, f := range product.Flags() {
		shares = append(shares, flagShare{Name: f.Name, Bit: f.Bit, Bad: f.Bit&product.FlagBad != 0,
			Share: percent(float64(w.flagged[i]) / total)})
	}
	return shares
}

// spectrum is the voxels of a place.
type spectrum struct {
	signal, sigma []float64 // NaN where a voxel is not good
	good          int
}

func (c *cube) spectrum(ctx context.Context, at place, grid instrument.Grid) (*spectrum, error) {
	planes := min(c.signal.Planes(), grid.Count)
	s := &spectrum{signal: make([]float64, planes), sigma: make([]float64, planes)}
	row := make([]float32, 3*c.elements())
	n := c.elements()
	for l := range planes {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		for i, im := range []*fitsutil.Image{c.signal, c.variance, c.flags} {
			if err := im.ReadPlaneRows(row[i*n:(i+1)*n], l, at.row, at.row+1); err != nil {
				return nil, err
			}
		}
		v, variance, bits := float64(row[at.element]), float64(row[n+at.element]), int16(row[2*n+at.element])
		s.signal[l], s.sigma[l] = math.NaN(), math.NaN()
		if sigma := math.Sqrt(variance); bits&product.FlagBad == 0 && !math.IsNaN(v) && !math.IsNaN(sigma) {
			s.signal[l], s.sigma[l] = v, sigma
			s.good++
		}
	}
	return s, nil
}
