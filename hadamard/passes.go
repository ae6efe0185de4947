package hadamard

// passes are the runs over a block that make up a transform. They are the seam
// for other instruction sets: each does a fixed set of additions per pixel, in
// a fixed order, and nothing else, so that implementations agree bit for bit.
// rows holds 2^p rows.
type passes struct {
	// gather copies row i of src to rows[index[i]] and sets sum to the rows'
	// sum, taken in groups of four: ((r0+r1)+(r2+r3)) added to the sum so far,
	// what is left of the last group one by one.
	gather func(rows []row, sum *row, src []float32, index []int32, stride int)
	// residue sets sum to the sum over the rows, in their order, of row less mean,
	// the difference in float32 and the sum in float64.
	residue func(sum *[lanes]float64, rows []row, mean *row)
	// first8 subtracts mean from every row and does the stages 1, 2, 4.
	first8 func(rows []row, mean *row)
	// middle8 does the stages h, 2h, 4h; middle4 the stages h, 2h.
	middle8 func(rows []row, h int)
	middle4 func(rows []row, h int)
	// last8 does the three highest stages, last4 the two highest; both write
	// s.base + scale*row, the product rounded before the sum, to the rows of dst
	// that to names in the order of places.last; to[0] is -1, and that row is
	// dropped.
	last8 func(s *transformScratch, to []int32, dst []float32, stride int, scale float32)
	last4 func(s *transformScratch, to []int32, dst []float32, stride int, scale float32)
}

// portablePasses are the passes in plain Go. Rows are handled as pointers to
// arrays of a constant size: no bounds are checked within.
var portablePasses = passes{
	gather:  gather,
	residue: residue,
	first8:  first8,
	middle8: middle8,
	middle4: middle4,
	last8:   last8,
	last4:   last4,
}

func gather(rows []row, sum *row, src []float32, index []int32, stride int) {
	*sum = row{}
	i, at := 0, 0
	for ; i+4 <= len(index); i += 4 {
		r0, r1 := rowAt(src, at), rowAt(src, at+stride)
		r2, r3 := rowAt(src, at+2*stride), rowAt(src, at+3*stride)
		at += 4 * stride
		// One by one: a joint assignment would copy by way of the stack.
		rows[index[i]] = *r0
		rows[index[i+1]] = *r1
		rows[index[i+2]] = *r2
		rows[index[i+3]] = *r3
		for p := range sum {
			sum[p] += (r0[p] + r1[p]) + (r2[p] + r3[p])
		}
	}
	for ; i < len(index); i++ {
		r := rowAt(src, at)
		at += stride
		rows[index[i]] = *r
		for p := range sum {
			sum[p] += r[p]
		}
	}
}

func residue(sum *[lanes]float64, rows []row, mean *row) {
	*sum = [lanes]float64{}
	for i := range rows {
		r := &rows[i]
		for p := range sum {
			sum[p] += float64(r[p] - mean[p])
		}
	}
}

// center subtracts mean from every row.
func center(rows []row, mean *row) {
	for i := range rows {
		r := &rows[i]
		for p := range r {
			r[p] -= mean[p]
		}
	}
}

func first8(rows []row, mean *row) {
	for ; len(rows) >= 8; rows = rows[8:] {
		r := (*[8]row)(rows)
		for p := range lanes {
			m := mean[p]
			a0, a1, a2, a3 := r[0][p]-m, r[1][p]-m, r[2][p]-m, r[3][p]-m
			a4, a5, a6, a7 := r[4][p]-m, r[5][p]-m, r[6][p]-m, r[7][p]-m
			a0, a1, a2, a3 = a0+a1, a0-a1, a2+a3, a2-a3
			a4, a5, a6, a7 = a4+a5, a4-a5, a6+a7, a6-a7
			a0, a1, a2, a3 = a0+a2, a1+a3, a0-a2, a1-a3
			a4, a5, a6, a7 = a4+a6, a5+a7, a4-a6, a5-a7
			r[0][p], r[1][p], r[2][p], r[3][p] = a0+a4, a1+a5, a2+a6, a3+a7
			r[4][p], r[5][p], r[6][p], r[7][p] = a0-a4, a1-a5, a2-a6, a3-a7
		}
	}
}

func middle8(rows []row, h int) {
	for ; len(rows) >= 8*h; rows = rows[8*h:] {
		for i := range h {
			butterfly8(&rows[i], &rows[i+h], &rows[i+2*h], &rows[i+3*h],
				&rows[i+4*h], &rows[i+5*h], &rows[i+6*h], &rows[i+7*h])
		}
	}
}

func butterfly8(r0, r1, r2, r3, r4, r5, r6, r7 *row) {
	for p := range lanes {
		a0, a1, a2, a3 := r0[p]+r1[p], r0[p]-r1[p], r2[p]+r3[p], r2[p]-r3[p]
		a4, a5, a6, a7 := r4[p]+r5[p], r4[p]-r5[p], r6[p]+r7[p], r6[p]-r7[p]
		a0, a1, a2, a3 = a0+a2, a1+a3, a0-a2, a1-a3
		a4, a5, a6, a7 = a4+a6, a5+a7, a4-a6, a5-a7
		r0[p], r1[p], r2[p], r3[p] = a0+a4, a1+a5, a2+a6, a3+a7
		r4[p], r5[p], r6[p], r7[p] = a0-a4, a1-a5, a2-a6, a3-a7
	}
}

func middle4(rows []row, h int) {
	for ; len(rows) >= 4*h; rows = rows[4*h:] {
		for i := range h {
			r0, r1, r2, r3 := &rows[i], &rows[i+h], &rows[i+2*h], &rows[i+3*h]
			for p := range lanes {
				a0, a1, a2, a3 := r0[p]+r1[p], r0[p]-r1[p], r2[p]+r3[p], r2[p]-r3[p]
				r0[p], r1[p], r2[p], r3[p] = a0+a2, a1+a3, a0-a2, a1-a3
			}
		}
	}
}

func last8(s *transformScratch, to []int32, dst []float32, stride int, scale float32) {
	h := len(s.rows) / 8
	for i := range h {
		var in, out [8]*row
		for t := range in {
			in[t] = &s.rows[i+t*h]
			out[t] = s.target(to[8*i+t], dst, stride)
		}
		scatter8(&in, &out, &s.base, scale)
	}
}

func scatter8(in, out *[8]*row, base *row, scale float32) {
	r0, r1, r2, r3, r4, r5, r6, r7 := in[0], in[1], in[2], in[3], in[4], in[5], in[6], in[7]
	o0, o1, o2, o3, o4, o5, o6, o7 := out[0], out[1], out[2], out[3], out[4], out[5], out[6], out[7]
	for p := range lanes {
		a0, a1, a2, a3 := r0[p]+r1[p], r0[p]-r1[p], r2[p]+r3[p], r2[p]-r3[p]
		a4, a5, a6, a7 := r4[p]+r5[p], r4[p]-r5[p], r6[p]+r7[p], r6[p]-r7[p]
		a0, a1, a2, a3 = a0+a2, a1+a3, a0-a2, a1-a3
		a4, a5, a6, a7 = a4+a6, a5+a7, a4-a6, a5-a7
		b := base[p]
		o0[p], o4[p] = b+float32(scale*(a0+a4)), b+float32(scale*(a0-a4))
		o1[p], o5[p] = b+float32(scale*(a1+a5)), b+float32(scale*(a1-a5))
		o2[p], o6[p] = b+float32(scale*(a2+a6)), b+float32(scale*(a2-a6))
		o3[p], o7[p] = b+float32(scale*(a3+a7)), b+float32(scale*(a3-a7))
	}
}

func last4(s *transformScratch, to []int32, dst []float32, stride int, scale float32) {
	h := len(s.rows) / 4
	for i := range h {
		r0, r1, r2, r3 := &s.rows[i], &s.rows[i+h], &s.rows[i+2*h], &s.rows[i+3*h]
		o0, o1 := s.target(to[4*i], dst, stride), s.target(to[4*i+1], dst, stride)
		o2, o3 := s.target(to[4*i+2], dst, stride), s.target(to[4*i+3], dst, stride)
		for p := range lanes {
			a0, a1, a2, a3 := r0[p]+r1[p], r0[p]-r1[p], r2[p]+r3[p], r2[p]-r3[p]
			b := s.base[p]
			o0[p], o1[p] = b+float32(scale*(a0+a2)), b+float32(scale*(a1+a3))
			o2[p], o3[p] = b+float32(scale*(a0-a2)), b+float32(scale*(a1-a3))
		}
	}
}

// target is row i of dst, or a row to be forgotten when i is negative.
func (s *transformScratch) target(i int32, dst []float32, stride int) *row {
	if i < 0 {
		return &s.drop
	}
	return rowAt(dst, int(i)*stride)
}
