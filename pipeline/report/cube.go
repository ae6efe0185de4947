package report

import (
	"context"
	"fmt"
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

const (
	// Of a cube whose signal and flags hold more than this many bytes only every
	// so manieth plane is looked at: a gibibyte is read in a few seconds.
	scanBytes = 1 << 30
	// Rows are read in pieces of about this many voxels, 1 MiB of float32.
	pieceVoxels = 1 << 18
	// bytesPerVoxel of SIGNAL and FLAGS together, as product writes them.
	bytesPerVoxel = 4 + 2
)

// whiteLight is the mean over wavelength of the good voxels.
type whiteLight struct {
	elements, rows int
	mean           []float64 // [row][element]; NaN without a good voxel
	good           []int32   // good voxels among the planes looked at
	planes, all    int       // planes looked at, and all
	flagged        []int64   // voxels that have the flag, in the order of product.Flags
}

func (c *cube) whiteLight(ctx context.Context) (*whiteLight, error) {
	w := &whiteLight{elements: c.elements(), rows: c.rows(), all: c.signal.Planes(), flagged: make([]int64, len(product.Flags()))}
	w.mean, w.good = make([]float64, w.elements*w.rows), make([]int32, w.elements*w.rows)
	stride := strideFor(w.elements*w.rows, w.all)
	piece := min(max(1, pieceVoxels/w.elements), w.rows)
	signal, flags := make([]float32, piece*w.elements), make([]float32, piece*w.elements)
	for l := stride / 2; l < w.all; l += stride {
		w.planes++
		for y := 0; y < w.rows; y += piece {
			if err := ctx.Err(); err != nil {
				return nil, err
			}
			end := min(y+piece, w.rows)
			s, f := signal[:(end-y)*w.elements], flags[:(end-y)*w.elements]
			if err := c.signal.ReadPlaneRows(s, l, y, end); err != nil {
				return nil, err
			}
			if err := c.flags.ReadPlaneRows(f, l, y, end); err != nil {
				return nil, err
			}
			w.add(y*w.elements, s, f)
		}
	}
	for i, n := range w.good {
		w.mean[i] /= float64(n) // NaN for 0/0
	}
	return w, nil
}

// strideFor is the distance of the planes to look at: the middle one of every
// stride planes, and at least one plane.
func strideFor(voxels, planes int) int {
	most := max(1, scanBytes/(bytesPerVoxel*max(voxels, 1)))
	return max(1, (planes+most-1)/most)
}

// add takes in voxels of a plane from an index on.
func (w *whiteLight) add(at int, signal, flags []float32) {
	all := product.Flags()
	for i, f := range flags {
		bits := int16(f)
		if bits&product.FlagBad == 0 && !math.IsNaN(float64(signal[i])) {
			w.mean[at+i] += float64(signal[i])
			w.good[at+i]++
		}
		if bits == 0 {
			continue
		}
		for n, flag := range all {
			if bits&flag.Bit != 0 {
				w.flagged[n]++
			}
		}
	}
}

// note says which planes the picture shows.
func (w *whiteLight) note() string {
	if w.planes == w.all {
		return fmt.Sprintf("all %d wavelengths", w.all)
	}
	return fmt.Sprintf("%d of %d wavelengths, evenly chosen as the cube is large", w.planes, w.all)
}

// flagShare is a flag with the part of the voxels that have it.
type flagShare struct {
	Name  string
	Bit   int16
	Share string
	Bad   bool
}

func (w *whiteLight) flagShares() []flagShare {
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
