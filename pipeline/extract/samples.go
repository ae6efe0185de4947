package extract

// pixelRow is the variances of a detector row.
type pixelRow struct {
	y int
	// own is the variance of decoded elements, [slot of the aperture's elements][column],
	// or [0][column] where all elements of a pixel have the same; common is the part
	// of it that all elements share.
	own    [][]float32
	common []float32
	plane  []float32 // plane 1 of PIXELVAR
}

func (p *pixelRow) of(slot int) []float32 { return p.own[min(slot, len(p.own)-1)] }

// readPixels reads the row y of PIXELVAR.
func (c *Cube) readPixels(y int) (*pixelRow, error) {
	p := &pixelRow{y: y, common: make([]float32, c.noise.Columns), plane: make([]float32, c.noise.Columns)}
	for i, dst := range [][]float32{p.plane, p.common} {
		if err := c.pixelVariance.ReadPlaneRows(dst, i, y, y+1); err != nil {
			return nil, err
		}
	}
	if c.noise.Uniform {
		p.own = [][]float32{p.plane}
	}
	return p, nil
}

// block is the pixels x0..x0+n-1 of a detector row: all code rows or columns,
// [row][pixel].
type block struct {
	x0, n int
	// predicted is the light of each step, variances that of its samples.
	predicted, variances []float32
	light                []float32 // of each code column
	own                  []float64 // what variances make of every element, where all are the same
	// erased are the pixels' restored samples, nil for none; white is the mean variance
	// of a sample there.
	erased []*erasure
	white  []float64
}

// blockPixels are worked on together.
const blockPixels = 256

// samples rebuilds the variances of a block's samples, s_k^2, from the light of all
// elements:
//
//	s_k^2 = weight_k (level + photon variance * (W f)_k),
//
// with the level of each pixel such that the samples add up to what PIXELVAR says. What
// Of a pixel with restored samples PIXELVAR says 1 + tr(Q)/v times as much. What
// PIXELVAR holds for the errors of the throughput, sum (error_k (W f)_k)^2, is taken out:
// all pixels share those errors, see addThroughput.
func (c *Cube) samples(b *block, light [][]float32, p *pixelRow) {
	v, n := c.noise.V, b.n
	if len(b.light) != v*n {
		b.light, b.predicted, b.variances = make([]float32, v*n), make([]float32, v*n), make([]float32, v*n)
		b.own, b.white = make([]float64, n), make([]float64, n)
	}
	b.erased = c.erased.row(p.y, b.x0, n)
	clear(b.light)
	for j, column := range c.columns {
		copy(b.light[column*n:(column+1)*n], light[j][b.x0:b.x0+n])
	}
	c.decoder.Predict(b.predicted, b.light, n, n)
	_, closed := c.decoder.Code().InverseEntries()
	for x := range n {
		level := float64(p.plane[b.x0+x])
		if c.noise.Uniform {
			sum := (level - float64(p.common[b.x0+x])) / (closed * closed)
			for k := range c.weight {
				shared := c.noise.ThroughputErr[k] * float64(b.predicted[k*n+x])
				sum -= shared * shared
			}
			b.own[x] = sum * closed * closed
			if e := b.erased[x]; e != nil {
				sum /= 1 + e.trace/float64(v)
			}
			b.white[x] = sum / float64(v)
			for k, w := range c.weight {
				sum -= w * c.noise.PhotonVariance * float64(b.predicted[k*n+x])
			}
			level = sum / c.sumWeight
		}
		for k, w := range c.weight {
			b.variances[k*n+x] = float32(w * (level + c.noise.PhotonVariance*float64(b.predicted[k*n+x])))
		}
	}
}

// ownVariances fills p.own for elements, for codes whose columns differ.
func (c *Cube) ownVariances(p *pixelRow, light [][]float32, elements []int) {
	p.own = table[float32](len(elements), c.noise.Columns)
	var b block
	for b.x0 = 0; b.x0 < c.noise.Columns; b.x0 += blockPixels {
		b.n = min(blockPixels, c.noise.Columns-b.x0)
		c.samples(&b, light, p)
		dst := make([]float32, len(b.variances))
		c.decoder.Variance(dst, b.variances, b.n, b.n, 0)
		for slot, j := range elements {
			for x, v := range dst[c.columns[j]*b.n:][:b.n] {
				p.own[slot][b.x0+x] = v + p.common[b.x0+x]
			}
		}
	}
}
