package extract

import "slices"

// Of an m-sequence each of whose code rows has as many frames as the others, the
// covariance of two elements of a pixel is known from the light of a third, without the
// samples' variances one by one. With w the weight of a row, a level and P the photon
// variance, s_k^2 = w (level + P (W f)_k); the covariance of columns j and j' is that of the
// column c that is their product (hadamard.Decoder.Covariance), -2/(v+1) times the decode
// of s^2 there, and decoding gives 1 as 2/(v+1) and W f as f:
//
//	cov_jj' = -2 w/(v+1) (2 level/(v+1) + P f_c).
//
// f_c is 0 where c is a dark column.

// isEven tells whether that is so.
func (c *Cube) isEven() bool {
	return c.noise.Uniform && c.decoder.CovarianceByColumn() && !slices.ContainsFunc(c.weight, func(w float64) bool { return w != c.weight[0] })
}

// addUp gives rowLight.total and shared for light, [element][column].
func (c *Cube) addUp(light [][]float32) (total, shared []float64) {
	columns := c.noise.Columns
	total, shared = make([]float64, columns), make([]float64, columns)
	for _, row := range light {
		for x, v := range row {
			total[x] += float64(v)
		}
	}
	if !c.hasThroughput() {
		return total, shared
	}
	var b block
	for b.x0 = 0; b.x0 < columns; b.x0 += blockPixels {
		b.n = min(blockPixels, columns-b.x0)
		c.predict(&b, light)
		for k, e := range c.noise.ThroughputErr {
			for x, v := range b.predicted[k*b.n : (k+1)*b.n] {
				part := e * float64(v)
				shared[b.x0+x] += part * part
			}
		}
	}
	return total, shared
}

// evenSamples is samples for such a code: own, white and level, without variances.
func (c *Cube) evenSamples(b *block, light *rowLight, p *pixelRow) {
	v, n := float64(c.noise.V), b.n
	if len(b.level) != n {
		b.own, b.white, b.level = make([]float64, n), make([]float64, n), make([]float64, n)
	}
	b.erased = c.erased.row(p.y, b.x0, n)
	design := c.decoder.Code().Design()
	unit := design.ReadNoiseVariance() / v
	ones := float64(c.noise.K) * c.weight[0] * c.noise.PhotonVariance
	for x := range n {
		at := b.x0 + x
		sum := (float64(p.plane[at])-float64(p.common[at]))/unit - light.shared[at]
		b.own[x] = sum * unit
		if e := b.erased[x]; e != nil {
			sum /= 1 + e.trace/v
		}
		b.white[x] = sum / v
		b.level[x] = (sum - ones*light.total[at]) / c.sumWeight
	}
}

// evenCoupling is what coupling needs of such a code.
type evenCoupling struct {
	light         [][]float32 // [code column][column of the detector]; nil for a dark column
	perLevel, per float64     // -4w/(v+1)^2, and -2 w P/(v+1)
}

func (c *Cube) newEvenCoupling() *evenCoupling {
	size := float64(c.noise.V + 1)
	w := c.weight[0]
	return &evenCoupling{perLevel: -4 * w / (size * size), per: -2 * w * c.noise.PhotonVariance / size}
}

// of is e for the light of a row.
func (e evenCoupling) of(c *Cube, light *rowLight) *evenCoupling {
	e.light = make([][]float32, c.noise.V)
	for j, column := range c.columns {
		e.light[column] = light.of[j]
	}
	return &e
}

// at is the covariance of the pair whose product is a code column.
func (e *evenCoupling) at(b *block, x int, column int32) float64 {
	v := e.perLevel * b.level[x]
	if f := e.light[column]; f != nil {
		v += e.per * float64(f[b.x0+x])
	}
	return v
}

// lightOfPairs are the elements whose light tells the covariances of the given ones, those
// among them, ascending.
func (k *coupling) lightOfPairs(c *Cube, elements []int) []int {
	wanted := make([]bool, c.Elements)
	for a, j := range elements {
		wanted[j] = true
		for b := range a {
			if j := c.noise.Element[k.by[a][b]]; j >= 0 {
				wanted[j] = true
			}
		}
	}
	var all []int
	for j, w := range wanted {
		if w {
			all = append(all, j)
		}
	}
	return all
}

// chooseEven takes the short way to covariances where the code has one and nothing else
// needs the samples one by one.
func (p *propagator) chooseEven() {
	if !p.c.isEven() || len(p.sums) > 0 || p.c.hasThroughput() && !p.byMoments() {
		return
	}
	p.even, p.fork.even = true, p.c.newEvenCoupling()
	if !p.c.hasThroughput() {
		p.of = p.fork.lightOfPairs(p.c, p.elements)
	}
}

// lightOf is what is needed of the light of row y.
func (p *propagator) lightOf(y int) (*rowLight, error) {
	if p.even {
		return p.light.some(y, p.of)
	}
	all, err := p.light.row(y)
	return &rowLight{of: all}, err
}
