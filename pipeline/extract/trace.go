package extract

import "math"

// traceRow holds the weights of the voxels of one row of an aperture on the columns
// of the straightened row.
type traceRow struct {
	y0       int
	from, to int     // cells
	first    []int32 // [cell][wavelength]: the column of the first weight
	start    []int32 // where a voxel's weights begin in w, one more than voxels
	w        []float32
	scale    []float32 // [cell][wavelength]: see scaleTo; 0 without weight
	// reach is the channels, first and one more than the last, that reach each block of
	// columns, [cell][block].
	reach [][][2]int32
}

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

// voxel gives the weights of a voxel of cell i on the columns from first on.
func (t *traceRow) voxel(i, l, channels int) (first int, w []float32) {
	at := (i-t.from)*channels + l
	return int(t.first[at]), t.w[t.start[at]:t.start[at+1]]
}

// weightsOfVoxel is the number of weights that a voxel of 1 px usually has.
const weightsOfVoxel = 9

// newTraceRow computes the weights of row y0 of the aperture, cells from..to-1:
// those of resampling, divided by the response, times the aperture's, scaled such
// that each voxel has its own VARIANCE. own is the variance of each slot's
// straightened row, by column.
func (c *Cube) newTraceRow(a *aperture, y0, from, to int, own func(slot int) []float32) (*traceRow, error) {
	n := (to - from) * c.Grid.Count
	t := &traceRow{
		y0: y0, from: from, to: to, scale: make([]float32, 0, n), first: make([]int32, 0, n), start: make([]int32, 0, n+1),
		w: make([]float32, 0, weightsOfVoxel*n),
	}
	slit, err := c.slitRow(0, y0)
	if err != nil {
		return nil, err
	}
	channels := c.Grid.Count
	edges := make([]float64, channels+1)
	for i := from; i < to; i++ {
		j := a.cells[i].element
		variance := own(a.slot[i])
		c.geometry.Places(edges, float64(j), float64(y0), c.edges)
		t.reach = append(t.reach, make([][2]int32, (c.noise.Columns+blockPixels-1)/blockPixels))
		for l := range channels {
			at, first, scale := len(t.w), 0, 0.0
			if a.weight[i][l] != 0 {
				first, t.w = c.resampler.Weights(t.w, edges[l], edges[l+1])
				t.note(l, first, first+len(t.w)-at-1)
				scale = scaleTo(t.w[at:], variance[first:], c.response(slit, j, l), c.pixelPart(a, i, l), a.weight[i][l])
			}
			t.first, t.start = append(t.first, int32(first)), append(t.start, int32(at))
			t.scale = append(t.scale, float32(scale))
		}
	}
	t.start = append(t.start, int32(len(t.w)))
	return t, nil
}

// pixelPart is VARIANCE of a voxel without what the responses add.
func (c *Cube) pixelPart(a *aperture, i, l int) float64 {
	v, variance := c.onSky.before(a, i, l)
	return variance - v*v*(c.noise.ResponseVariance+a.slitVariance[i]+c.bandVarianceAt(a.cells[i].element, l))
}

// bandVarianceAt is the relative variance of BANDRESP.
func (c *Cube) bandVarianceAt(element, voxel int) float64 {
	if c.bandVariance == nil {
		return 0
	}
	return float64(c.bandVariance[voxel*c.Elements+element])
}

// scaleTo turns the weights w of resampling into those of an aperture: divided by
// the response, times weight, times scale, which makes the voxel's variance what it
// is said to be. It is 1 unless the cube was scaled, by a measured error scale or to
// physical units.
func scaleTo(w, variance []float32, response, said, weight float64) (scale float64) {
	sum := 0.0
	for k, w := range w {
		sum += float64(w) * float64(w) * float64(variance[k])
	}
	sum /= response * response
	scale = 1
	if sum > 0 && said > 0 {
		scale = math.Sqrt(said / sum)
	}
	factor := float32(weight / response * scale)
	for k := range w {
		w[k] *= factor
	}
	return scale
}
