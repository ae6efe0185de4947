package trial

import (
	"fmt"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// Cube is a cube in memory, in FITS order: value [(l*Rows + y)*N + j].
type Cube struct {
	N, Rows, Voxels  int
	Signal, Variance []float32
	Flags            []int16
}

// Good tells whether voxel i is.
func (c *Cube) Good(i int) bool { return c.Flags[i]&product.FlagBad == 0 }

// ReadCube reads a cube.fits or elements.fits, whose axes are then x, y, column.
func ReadCube(path string) (*Cube, error) {
	f, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close() // only read from
	c := new(Cube)
	var axes []int
	if c.Signal, axes, err = readImage(f, product.Signal); err != nil {
		return nil, err
	}
	c.N, c.Rows, c.Voxels = axes[0], axes[1], axes[2]
	if c.Variance, _, err = readImage(f, product.Variance); err != nil {
		return nil, err
	}
	flags, _, err := readImage(f, product.FlagsImage)
	if err != nil {
		return nil, err
	}
	c.Flags = make([]int16, len(flags))
	for i, v := range flags {
		c.Flags[i] = int16(v)
	}
	return c, nil
}

// ReadTruth reads SIGNAL of a truth.fits on the grid of c.
func (c *Cube) ReadTruth(path string) ([]float32, error) {
	f, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close() // only read from
	data, axes, err := readImage(f, product.Signal)
	if err != nil {
		return nil, err
	}
	if want := []int{c.N, c.Rows, c.Voxels}; !slices.Equal(axes, want) {
		return nil, fmt.Errorf("%s has axes %v, the cube %v", path, axes, want)
	}
	return data, nil
}

func readImage(f *fitsutil.File, name string) (data []float32, axes []int, err error) {
	im, err := f.ImageNamed(name)
	if err != nil {
		return nil, nil, err
	}
	if len(im.Axes) != 3 {
		return nil, nil, fmt.Errorf("image %s has axes %v, not three", name, im.Axes)
	}
	plane := im.Width() * im.Height()
	data = make([]float32, plane*im.Planes())
	for l := range im.Planes() {
		if err := im.ReadPlaneRows(data[l*plane:(l+1)*plane], l, 0, im.Height()); err != nil {
			return nil, nil, err
		}
	}
	return data, im.Axes, nil
}
