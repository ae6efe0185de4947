package view

import (
	"context"
	"fmt"
	"math"
	"slices"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// images are those of the cube.
type images struct{ signal, variance, flags, scale *fitsutil.Image }

func openImages(f *fitsutil.File) (m images, err error) {
	for _, im := range []struct {
		name string
		to   **fitsutil.Image
	}{{product.Signal, &m.signal}, {product.Variance, &m.variance}, {product.FlagsImage, &m.flags}, {product.Scale, &m.scale}} {
		if *im.to, err = f.ImageNamed(im.name); err != nil {
			return m, err
		}
		if !slices.Equal((*im.to).Axes, m.signal.Axes) {
			return m, fmt.Errorf("%s: image %s has the axes %v, %s %v; make the cube again with reduce", f.Path(), im.name, (*im.to).Axes, product.Signal, m.signal.Axes)
		}
	}
	return m, nil
}

// bandSums are sums over the good voxels of some planes, by place, [row*elements+element].
type bandSums struct {
	signal, variance, scale []float64
	count                   []uint32 // good voxels
	flags                   []int16  // of all voxels
}

func newBandSums(places int) *bandSums {
	return &bandSums{make([]float64, places), make([]float64, places), make([]float64, places), make([]uint32, places), make([]int16, places)}
}

func (s *bandSums) clear() {
	clear(s.signal)
	clear(s.variance)
	clear(s.scale)
	clear(s.count)
	clear(s.flags)
}

// planeReader adds up planes.
type planeReader struct {
	images
	signalOf, varianceOf, flagsOf, scaleOf []float32
	scaled                                 bool // scale is wanted as well
}

func (m images) newReader(scaled bool) *planeReader {
	n := m.signal.Width() * m.signal.Height()
	return &planeReader{m, make([]float32, n), make([]float32, n), make([]float32, n), make([]float32, n), scaled}
}

// add adds plane l to s, and gives the sum of its good voxels and their number.
func (r *planeReader) add(ctx context.Context, s *bandSums, l int) (sum float64, good int, err error) {
	rows := r.signal.Height()
	for _, im := range []struct {
		image *fitsutil.Image
		to    []float32
	}{{r.signal, r.signalOf}, {r.variance, r.varianceOf}, {r.flags, r.flagsOf}, {r.scale, r.scaleOf}} {
		if im.image == r.scale && !r.scaled {
			continue
		}
		if err := ctx.Err(); err != nil {
			return 0, 0, err
		}
		if err := im.image.ReadPlaneRows(im.to, l, 0, rows); err != nil {
			return 0, 0, err
		}
	}
	for i, v := range r.signalOf {
		flags, variance := int16(r.flagsOf[i]), r.varianceOf[i]
		s.flags[i] |= flags
		if !isGood(flags, v, variance) {
			continue
		}
		s.signal[i] += float64(v)
		s.variance[i] += float64(variance)
		s.count[i]++
		sum += float64(v)
		good++
		if r.scaled {
			s.scale[i] += float64(r.scaleOf[i])
		}
	}
	return sum, good, nil
}

// isGood tells whether a voxel is added up, as extract does.
func isGood(flags int16, signal, variance float32) bool {
	return flags&product.FlagBad == 0 && signal-signal == 0 && variance > 0 && variance-variance == 0
}

// meanSignal is the mean of a sum over so many voxels; not a number of none.
func meanSignal(sum float64, good int) float64 {
	if good == 0 {
		return math.NaN()
	}
	return sum / float64(good)
}
