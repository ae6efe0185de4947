package extract

import (
	"context"
	"math"

	"mirrorloom/pipeline/product"
)

// aperture is cells with their voxels, and the weights with which they are added
// up: slices [cell][wavelength].
type aperture struct {
	cells            []cell
	firstRow, endRow int
	signal, variance [][]float32
	flags            [][]int16
	// weight is 0 for a voxel that is not good.
	weight [][]float64
	// slitVariance is the relative variance of each cell's slit response.
	slitVariance []float64
	// skyPart is what each cell sees of the sky that was subtracted, skyShare its weight in it.
	skyPart, skyShare []float64
	// elements are those of the cells, ascending; slot is the place of each cell's
	// element among them.
	elements []int
	slot     []int
}

// load reads the voxels of cells, which are sorted by row.
func (c *Cube) load(ctx context.Context, cells []cell) (*aperture, error) {
	return c.loadChannels(ctx, cells, 0, c.Grid.Count)
}

// loadChannels is load of channels from..to-1; the others stay 0.
func (c *Cube) loadChannels(ctx context.Context, cells []cell, from, to int) (*aperture, error) {
	a := &aperture{cells: cells, firstRow: cells[0].row, endRow: cells[len(cells)-1].row + 1}
	a.sortElements(c.Elements)
	n := c.Grid.Count
	a.signal, a.variance, a.flags = table[float32](len(cells), n), table[float32](len(cells), n), table[int16](len(cells), n)
	a.weight = table[float64](len(cells), n)
	if err := c.source().spectra(ctx, a, from, to); err != nil {
		return nil, err
	}
	if err := c.onSky.places(a, c.Elements); err != nil {
		return nil, err
	}
	return a, a.readSlit(c)
}

func (a *aperture) sortElements(elements int) {
	place := make([]int, elements)
	for _, k := range a.cells {
		place[k.element] = 1
	}
	for j, used := range place {
		if used > 0 {
			place[j] = len(a.elements)
			a.elements = append(a.elements, j)
		}
	}
	for _, k := range a.cells {
		a.slot = append(a.slot, place[k.element])
	}
}

func (a *aperture) readSlit(c *Cube) error {
	a.slitVariance = make([]float64, len(a.cells))
	row := -1
	var variance []float32
	for i, k := range a.cells {
		if k.row != row {
			var err error
			if variance, err = c.slitRow(1, k.row); err != nil {
				return err
			}
			row = k.row
		}
		if variance != nil {
			a.slitVariance[i] = float64(variance[k.element])
		}
	}
	return nil
}

// good tells whether a voxel may be added up, as combine does.
func (a *aperture) good(i, l int) bool {
	return isGood(a.flags[i][l], a.signal[i][l], a.variance[i][l])
}

func isGood(flags int16, signal, variance float32) bool {
	return flags&product.FlagBad == 0 && finite(signal) && variance > 0 && finite(variance)
}

func finite(x float32) bool { return x-x == 0 }

func isNaN(x float32) bool { return x != x }

// table makes rows in one piece of memory.
func table[T any](rows, columns int) [][]T {
	all := make([]T, rows*columns)
	t := make([][]T, rows)
	for i := range t {
		t[i] = all[i*columns : (i+1)*columns : (i+1)*columns]
	}
	return t
}

// The sum of a channel is scaled to the whole aperture where voxels are missing;
// below leastCoverage it is not a number.
const leastCoverage = 0.5

// plain sets the weights of a sum: the cells' areas, scaled in each channel by the
// whole area over that of good voxels, less the mean of the good background over
// the whole area. It returns the good part of the aperture.
func (a *aperture) plain() (coverage []float64) {
	coverage = make([]float64, len(a.weight[0]))
	whole, wholeBackground := 0.0, 0.0
	for _, k := range a.cells {
		whole += k.area
		wholeBackground += k.background
	}
	for l := range coverage {
		area, background := 0.0, 0.0
		for i, k := range a.cells {
			a.weight[i][l] = 0
			if a.good(i, l) {
				area += k.area
				background += k.background
			}
		}
		coverage[l] = area / whole
		if coverage[l] < leastCoverage || background < leastCoverage*wholeBackground {
			continue
		}
		for i, k := range a.cells {
			if !a.good(i, l) {
				continue
			}
			a.weight[i][l] = k.area / coverage[l]
			if k.background > 0 {
				a.weight[i][l] -= whole * k.background / background
			}
		}
	}
	return coverage
}

// sum is the weighted sum of a channel with its naive variance; not a number where
// no voxel has weight.
func (a *aperture) sum(l int) (signal, naive float64) {
	any := false
	for i := range a.cells {
		if w := a.weight[i][l]; w != 0 {
			any = true
			signal += w * float64(a.signal[i][l])
			naive += w * w * float64(a.variance[i][l])
		}
	}
	if !any {
		return math.NaN(), math.NaN()
	}
	return signal, naive
}
