package hadamard

// CovarianceByColumn tells whether a pixel's whole covariance is v numbers, as
// with m-sequences, so that Covariance and CovarianceColumn may be called.
func (d *Decoder) CovarianceByColumn() bool { return d.code.family == MSequence }

// Covariance gives all covariances between the decoded columns of a pixel:
// cov(x_j, x_j') = dst[CovarianceColumn(j, j')] for j != j', s2 and dst as in
// Variance.
//
// For independent readings the covariance is sum_i(A_ji A_j'i s2_i), and the
// product of two different columns of 1-2W of an m-sequence is again one, m:
// 4/(v+1)^2 sum_i((1-2W_im) s2_i), which is -2/(v+1) times the decode of s2.
// The covariance of a column with itself is VarianceSum.
func (d *Decoder) Covariance(dst, s2 []float32, pixels, stride int) {
	if !d.CovarianceByColumn() {
		panic("internal error: hadamard: Covariance of a code that is no m-sequence")
	}
	d.Decode(dst, s2, pixels, stride)
	scale := -2 / float32(d.code.v+1)
	for m := range d.code.v {
		r := dst[m*stride : m*stride+pixels]
		for p := range r {
			r[p] *= scale
		}
	}
}

// CovarianceColumn is the column m whose place in Covariance's result holds
// the covariance of the different columns j and other; -1 when they are the
// same.
func (d *Decoder) CovarianceColumn(j, other int) int {
	t, ok := d.engine.(*transform)
	if !ok {
		panic("internal error: hadamard: CovarianceColumn of a code that is no m-sequence")
	}
	return int(t.columns.row[t.columns.index[j]^t.columns.index[other]])
}
