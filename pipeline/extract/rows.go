package extract

import (
	"context"

	"mirrorloom/fitsutil"
)

// voxelRows is where the voxels of an aperture, and the light behind them, come from: the
// cube's images, plane by plane, or a cache of them, row by row. Both give the same bits.
type voxelRows interface {
	// spectra fills channels from..to-1 of signal, variance and flags of a's cells.
	spectra(ctx context.Context, a *aperture, from, to int) error
	// light gives a reader of light for one pass over rows; electrons turns the cube's
	// unit into detected electrons, by wavelength, nil for 1.
	light(electrons []float64) lightRows
}

// lightRows gives the light of all elements at the detector's pixels, electrons of a
// science exposure. Rows are to be asked for in ascending order.
type lightRows interface {
	// row is that of detector row y, [element][column].
	row(y int) ([][]float32, error)
	// some is that of the elements asked for, all where the list is nil, with its sums.
	some(y int, elements []int) (*rowLight, error)
}

// rowLight is the light in a detector row.
type rowLight struct {
	// of is [element][column]; nil of elements that were not asked for.
	of [][]float32
	// total is the light of all elements, by column; shared the sum over the steps of
	// (throughput error times light of the step)^2. Both are nil where nobody asked.
	total, shared []float64
}

// source is where c's voxels come from.
func (c *Cube) source() voxelRows {
	if c.cached != nil {
		return c.cached
	}
	return imageRows{c}
}

// imageRows reads the cube's images.
type imageRows struct{ c *Cube }

func (r imageRows) light(electrons []float64) lightRows { return r.c.newLightReader(electrons) }

func (r imageRows) spectra(ctx context.Context, a *aperture, from, to int) error {
	c := r.c
	plane := make([]float32, (a.endRow-a.firstRow)*c.Elements)
	for _, im := range []struct {
		image *fitsutil.Image
		take  func(i, l int, v float32)
	}{
		{c.signal, func(i, l int, v float32) { a.signal[i][l] = v }},
		{c.variance, func(i, l int, v float32) { a.variance[i][l] = v }},
		{c.flags, func(i, l int, v float32) { a.flags[i][l] = int16(v) }},
	} {
		for l := from; l < to; l++ {
			if err := ctx.Err(); err != nil {
				return err
			}
			if err := im.image.ReadPlaneRows(plane, l, a.firstRow, a.endRow); err != nil {
				return err
			}
			for i, k := range a.cells {
				im.take(i, l, plane[(k.row-a.firstRow)*c.Elements+k.element])
			}
		}
	}
	return nil
}
