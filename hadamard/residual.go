package hadamard

import "fmt"

// Residual gathers the dark decodes of a block of pixels: decoded holds Ay as
// [code column][pixel], dst receives Ag y, or Rows y where a pedestal or rows were
// projected out, as [dark column][pixel] with the same stride, the dark columns in
// the order of Columns. dst and decoded may not overlap.
func (c *Checks) Residual(dst, decoded []float32, pixels, stride int) {
	c.check("Residual", len(dst), len(c.columns), pixels, stride)
	c.check("Residual", len(decoded), c.code.v, pixels, stride)
	for i, j := range c.columns {
		copy(dst[i*stride:i*stride+pixels], decoded[j*stride:])
	}
	switch {
	case len(c.lost) > 0:
		c.projectResidual(dst, pixels, stride)
	case c.pedestal:
		subtractMean(dst, len(c.columns), pixels, stride)
	}
}

// check guards the callers' invariants on block sizes.
func (c *Checks) check(name string, have, rows, pixels, stride int) {
	need := (rows-1)*stride + pixels
	if rows == 0 {
		need = 0
	}
	if pixels < 0 || stride < pixels || have < need {
		panic(fmt.Sprintf("internal error: hadamard: %s of %d rows of %d pixels at stride %d needs %d samples, has %d",
			name, rows, pixels, stride, need, have))
	}
}

// subtractMean takes from each pixel its mean over the rows.
func subtractMean(block []float32, rows, pixels, stride int) {
	for p := 0; p < pixels; p += lanes {
		n := min(lanes, pixels-p)
		var sum [lanes]float64
		for i := range rows {
			addRow(&sum, block[p+i*stride:p+i*stride+n])
		}
		for i := range rows {
			r := block[p+i*stride : p+i*stride+n]
			for q := range r {
				r[q] -= float32(sum[q] / float64(rows))
			}
		}
	}
}

// projectResidual replaces r = Ag y by Ag P y = (Ag Ag') X r, in place.
func (c *Checks) projectResidual(block []float32, pixels, stride int) {
	g := len(c.columns)
	in, x := make([]float64, g), make([]float64, g)
	k, l := float64(c.code.k), float64(c.code.l)
	for p := range pixels {
		for i := range in {
			in[i] = float64(block[i*stride+p])
		}
		sum := 0.0
		for i := range x {
			x[i] = 0
			for j, r := range in {
				x[i] += float64(c.inverse.At(i, j) * r)
			}
			sum += x[i]
		}
		for i, xi := range x {
			block[i*stride+p] = float32((xi - sum*l/(k*k)) / (k - l))
		}
	}
}
