package extract

import (
	"math"

	"mirrorloom/calib"
)

// traceRow holds the weights of the voxels of one row of an aperture on the columns
// of the straightened rows of the elements that they are made of.
type traceRow struct {
	y0       int
	from, to int // cells
	sources  []source
	first    []int32 // [source][wavelength]: the column of the first weight
	start    []int32 // where a voxel's weights begin in w, one more than voxels
	w        []float32
	scale    []float32 // [cell][wavelength]: see scaleTo; 0 without weight
	// reach is the channels, first and one more than the last, that reach each block of
	// columns, [source][block].
	reach [][][2]int32
	// gathers are the weights of the elements' rows, by slot, where the field is shifted;
	// else nil: all have those of the trace.
	gathers map[int]*calib.Gather
}

// source is an element that the voxels of a cell are made of: the cell's own, or, where
// the field is shifted, one of several.
type source struct{ cell, slot, element int }

// note takes down that channel l of the last cell lies on columns first..last.
func (t *traceRow) note(l, first, last int) {
	blocks := t.reach[len(t.reach)-1]
	for b := first / blockPixels; b <= last/blockPixels; b++ {
		if r := &blocks[b]; r[1] == 0 {
			*r = [2]int32{int32(l), int32(l + 1)}
		} else {
			r[1] = int32(l + 1)
		}
	}
}

// voxel gives the weights of a voxel of source i on the columns from first on.
func (t *traceRow) voxel(i, l, channels int) (first int, w []float32) {
	at := i*channels + l
	return int(t.first[at]), t.w[t.start[at]:t.start[at+1]]
}

// weightsOfVoxel is the number of weights that a voxel of 1 px usually has.
const weightsOfVoxel = 9

// elementRow is what newTraceRow has to know of an element: its slot, the edges of its
// voxels and the variance of its straightened row, both in columns.
type elementRow struct {
	slot     int
	edges    []float64
	variance []float32
}

// newTraceRow computes the weights of row y0 of the aperture, cells from..to-1:
// those of resampling, divided by the response, times those of the shifted field, times
// the aperture's, scaled such that each voxel has its own VARIANCE.
func (c *Cube) newTraceRow(a *aperture, y0, from, to int, of func(element int) *elementRow) (*traceRow, error) {
	channels := c.Grid.Count
	n := (to - from) * channels
	t := &traceRow{
		y0: y0, from: from, to: to, scale: make([]float32, n), first: make([]int32, 0, n), start: make([]int32, 0, n+1),
		w: make([]float32, 0, weightsOfVoxel*n),
	}
	slit, err := c.slitRows(y0)
	if err != nil {
		return nil, err
	}
	variances := make([]float64, channels)
	for i := from; i < to; i++ {
		j := a.cells[i].element
		clear(variances)
		first := len(t.sources)
		low, high := c.sourcesOf(j)
		for s := low; s <= high; s++ {
			row := of(s)
			t.sources = append(t.sources, source{i, row.slot, s})
			t.reach = append(t.reach, make([][2]int32, (c.noise.Columns+blockPixels-1)/blockPixels))
			for l := range channels {
				at, first := len(t.w), 0
				if factor := c.across(j, s, l); a.weight[i][l] != 0 && factor != 0 {
					first, t.w = c.resampler.Weights(t.w, row.edges[l], row.edges[l+1])
					t.note(l, first, first+len(t.w)-at-1)
					variances[l] += divide(t.w[at:], row.variance[first:], c.responseOf(slit, s, l)/factor)
				}
				t.first, t.start = append(t.first, int32(first)), append(t.start, int32(at))
			}
		}
		t.start = append(t.start, int32(len(t.w))) // for the last; the next source begins there
		for l := range channels {
			if a.weight[i][l] == 0 {
				continue
			}
			scale := scaleTo(variances[l], c.pixelPart(a, i, l))
			t.scale[(i-from)*channels+l] = float32(scale)
			for s := first; s < len(t.sources); s++ {
				_, w := t.voxel(s, l, channels)
				for k := range w {
					w[k] *= float32(a.weight[i][l] * scale)
				}
			}
		}
		t.start = t.start[:len(t.start)-1]
	}
	t.start = append(t.start, int32(len(t.w)))
	return t, nil
}

// pixelPart is VARIANCE of a voxel without what the responses add.
func (c *Cube) pixelPart(a *aperture, i, l int) float64 {
	v, variance := c.onSky.before(a, i, l)
	elements, rows := c.shares(a.cells[i], l)
	return variance - v*v*elements*(c.noise.ResponseVariance+rows*a.slitVariance[i]+c.bandVarianceAt(a.cells[i].element, l))
}

// bandVarianceAt is the relative variance of BANDRESP.
func (c *Cube) bandVarianceAt(element, voxel int) float64 {
	if c.bandVariance == nil {
		return 0
	}
	return float64(c.bandVariance[voxel*c.Elements+element])
}

// divide divides the weights w of resampling by the response and gives the variance of
// their sum, whose samples have these variances.
func divide(w, variance []float32, response float64) (sum float64) {
	inverse := float32(1 / response)
	for k := range w {
		w[k] *= inverse
		sum += float64(w[k]) * float64(w[k]) * float64(variance[k])
	}
	return sum
}

// scaleTo is what makes a voxel's variance what it is said to be. It is 1 unless the cube
// was scaled, by a measured error scale or to physical units.
func scaleTo(variance, said float64) float64 {
	if variance > 0 && said > 0 {
		return math.Sqrt(said / variance)
	}
	return 1
}
