package hadamard

// VarianceUniform tells whether decoding gives all columns of a pixel the same
// variance, as with every S-matrix; VarianceSum is then all of Variance.
func (d *Decoder) VarianceUniform() bool { return d.code.Design().IsS() }

// Variance is the variance of Decode's result when the readings are
// independent: dst[j] = b^2 sum_i(s2_i) + (a^2-b^2) sum_i(W_ij s2_i) for every
// pixel, the row sums of squares of A weighted by s2. s2 is [code row][pixel],
// dst [code column][pixel], otherwise as in Decode.
//
// s2 are variances estimated from unclipped readings and may be negative where
// the noise took them there: only the result is raised to floor. Clipping
// single readings would bias the sum (pulls of 0.87 to 0.96 were measured).
// For a code that is no S-matrix s2 should be predicted (Predict) from smoothed
// elements rather than read, because there each column has its own few
// readings, whose noise would go into the weight of the very signal.
func (d *Decoder) Variance(dst, s2 []float32, pixels, stride int, floor float32) {
	if d.VarianceUniform() {
		d.check("Variance", len(dst), len(s2), pixels, stride)
		d.VarianceSum(dst[:pixels], s2, pixels, stride, floor)
		for j := 1; j < d.code.v; j++ {
			copy(dst[j*stride:j*stride+pixels], dst[:pixels])
		}
		return
	}
	d.each("Variance", d.engine.spread, dst, s2, pixels, stride)
	for j := range d.code.v {
		raise(dst[j*stride:j*stride+pixels], floor)
	}
}

// VarianceSum is the variance that all columns of an S-matrix share:
// dst[pixel] = b^2 sum_i(s2_i) = 4/(v+1)^2 sum_i(s2_i), at least floor; s2 as
// in Variance, dst of pixels values. It may only be called when
// VarianceUniform.
func (d *Decoder) VarianceSum(dst, s2 []float32, pixels, stride int, floor float32) {
	if !d.VarianceUniform() {
		panic("internal error: hadamard: VarianceSum of a code that is no S-matrix")
	}
	d.check("VarianceSum", len(dst)+(d.code.v-1)*stride, len(s2), pixels, stride)
	_, closed := d.code.InverseEntries()
	dst = dst[:pixels]
	for p := 0; p < pixels; p += lanes {
		var sum [lanes]float64
		n := min(lanes, pixels-p)
		for i := range d.code.v {
			addRow(&sum, s2[p+i*stride:p+i*stride+n])
		}
		for q := range n {
			dst[p+q] = float32(closed * closed * sum[q])
		}
	}
	raise(dst, floor)
}

func addRow(sum *[lanes]float64, r []float32) {
	if len(r) == lanes {
		for p, x := range (*row)(r) {
			sum[p] += float64(x)
		}
		return
	}
	for p, x := range r {
		sum[p] += float64(x)
	}
}

// raise lifts what is below floor; NaN stays.
func raise(x []float32, floor float32) {
	for i := range x {
		if x[i] < floor {
			x[i] = floor
		}
	}
}
