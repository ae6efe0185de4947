package report

import (
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// cube is an open cube.fits.
type cube struct {
	file                    *fitsutil.File
	signal, variance, flags *fitsutil.Image
	// bad are the flags that keep a voxel from being looked at.
	bad int16
}

// wholly are the flags that may lie on all voxels of a cube, in which there is light all the
// same.
const wholly = product.FlagLost | product.FlagNominalWave | product.FlagLowFlat

func openCube(path string) (*cube, error) {
	file, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	c := &cube{file: file, bad: product.FlagBad}
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
	Says  string
}

func (w *Light) flagShares() []flagShare {
	var shares []flagShare
	total := float64(w.elements*w.rows) * float64(w.planes)
	for i, f := range product.Flags() {
		shares = append(shares, flagShare{Name: f.Name, Bit: f.Bit, Bad: f.Bit&product.FlagBad != 0, Says: sentence(f.Says),
			Share: percent(float64(w.flagged[i]) / total)})
	}
	return shares
}

// detectorColumns is the width of the detector; 0 for a combined cube, which has none.
func (c *cube) detectorColumns() int {
	im, err := c.file.ImageNamed(product.PixelVariance)
	if err != nil {
		return 0
	}
	return im.Width()
}
