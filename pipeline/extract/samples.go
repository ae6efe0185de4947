package extract

import "slices"

// pixelRow is the variances of a detector row.
type pixelRow struct {
	y int
	// own is the variance of decoded elements, [slot of the aperture's elements][column],
	// or [0][column] where all elements of a pixel have the same; common is the part
	// of it that all elements share.
	own [][]float32
	// shared is the part of own that comes from the errors of the throughput, where
	// variances differ; nil without.
	shared [][]float32
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
	level  []float64 // see evenSamples
}

// blockPixels are worked on together.
const blockPixels = 256

// samples rebuilds the variances of a block's samples, s_k^2, from the light of all
// elements:
//
//	s_k^2 = weight_k (level + photon variance * (W f)_k),
//
// with the level of each pixel such that the samples add up to what PIXELVAR says, but for a
// slit scan, where it is the level. Of a pixel with restored samples it says 1 + tr(Q)/v times
// as much where all elements have the same variance. What
// PIXELVAR holds for the errors of the throughput, sum (error_k (W f)_k)^2, is taken out:
// all pixels share those errors, see addThroughput.
func (c *Cube) samples(b *block, light [][]float32, p *pixelRow) {
	v, n := c.noise.V, b.n
	if len(b.variances) != v*n {
		b.variances = make([]float32, v*n)
		b.own, b.white = make([]float64, n), make([]float64, n)
	}
	b.erased = c.erased.row(p.y, b.x0, n)
	c.predict(b, light)
	unit := c.decoder.Code().Design().ReadNoiseVariance() / float64(v) // mean square of A's entries
	for x := range n {
		level := float64(p.plane[b.x0+x])
		if c.noise.Uniform || c.noise.Mean {
			sum := (level - float64(p.common[b.x0+x])) / unit
			for k := range c.weight {
				shared := c.noise.ThroughputErr[k] * float64(b.predicted[k*n+x])
				sum -= shared * shared
			}
			b.own[x] = sum * unit
			if e := b.erased[x]; e != nil && c.noise.Uniform {
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
		if !c.noise.Uniform {
			b.white[x] = c.mean(b.variances[x:], n)
		}
	}
}

// predict fills predicted.
func (c *Cube) predict(b *block, light [][]float32) {
	n := b.n
	if len(b.light) != c.noise.V*n {
		b.light, b.predicted = make([]float32, c.noise.V*n), make([]float32, c.noise.V*n)
	}
	clear(b.light)
	for j, column := range c.columns {
		copy(b.light[column*n:(column+1)*n], light[j][b.x0:b.x0+n])
	}
	c.decoder.Predict(b.predicted, b.light, n, n)
}

// ownVariances fills p.own for elements, for codes whose columns differ.
func (c *Cube) ownVariances(p *pixelRow, light [][]float32, elements []int) {
	p.own = table[float32](len(elements), c.noise.Columns)
	throughput := slices.ContainsFunc(c.noise.ThroughputErr, func(e float64) bool { return e > 0 })
	if throughput {
		p.shared = table[float32](len(elements), c.noise.Columns)
	}
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
		c.addSpread(p, &b, elements)
		if throughput {
			c.addShared(p, &b, elements, dst)
		}
	}
}

// addSpread adds what restored samples make of the elements' variances.
func (c *Cube) addSpread(p *pixelRow, b *block, elements []int) {
	columns := make([]int, len(elements))
	for slot, j := range elements {
		columns[slot] = c.columns[j]
	}
	var last *erasure
	var spread []float64
	for x, e := range b.erased {
		if e == nil {
			continue
		}
		if e != last {
			last, spread = e, e.spread(c.decoder.Code(), columns)
		}
		for slot := range elements {
			p.own[slot][b.x0+x] += float32(b.white[x] * spread[slot])
		}
	}
}

// addShared adds what the throughput's errors make of the elements' variances, with dst as
// memory.
func (c *Cube) addShared(p *pixelRow, b *block, elements []int, dst []float32) {
	for k, e := range c.noise.ThroughputErr {
		for x, light := range b.predicted[k*b.n : (k+1)*b.n] {
			shared := float32(e) * light
			b.variances[k*b.n+x] = shared * shared
		}
	}
	c.decoder.Variance(dst, b.variances, b.n, b.n, 0)
	for slot, j := range elements {
		for x, v := range dst[c.columns[j]*b.n:][:b.n] {
			p.shared[slot][b.x0+x] = v
			p.own[slot][b.x0+x] += v
		}
	}
}

// mean is that of every n-th value, one a code row.
func (c *Cube) mean(values []float32, n int) float64 {
	sum := 0.0
	for k := range c.noise.V {
		sum += float64(values[k*n])
	}
	return sum / float64(c.noise.V)
}
