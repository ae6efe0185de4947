package hadamard

// Whiten puts the checks Basis y of one pixel into dst (G values), from its dark decodes
// in the order of Columns: for readings of unit variance they are independent and of
// unit variance.
func (c *Checks) Whiten(dst, residual []float64) {
	for i := range dst[:c.G()] {
		sum := 0.0
		for d, m := range c.mix.RawRowView(i) {
			sum += float64(m * residual[d])
		}
		dst[i] = sum
	}
}

// Square is y'Py of one pixel, the square of what Whiten gives, from its dark decodes:
// for readings of unit variance, chi-square with G degrees of freedom.
func (c *Checks) Square(residual []float64) float64 {
	if c.mix == nil {
		return 0
	}
	square, sum := 0.0, 0.0
	if len(c.lost) == 0 { // X = own I + common J
		for _, r := range residual {
			square += float64(r * r)
			sum += r
		}
		return float64(c.own*square) + float64(c.common*sum*sum)
	}
	for i := range c.G() {
		sum = 0
		for d, m := range c.mix.RawRowView(i) {
			sum += float64(m * residual[d])
		}
		square += float64(sum * sum)
	}
	return square
}
