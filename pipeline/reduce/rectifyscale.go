package reduce

// straightenScale takes the error scale of row y along the trace: with the weights of
// its variance, but with those of its signal for errors that neighbours share.
func (r *rectifier) straightenScale(k *rectifyWorker, rows []*decodedRow, first, y int) {
	if !r.scaled {
		return
	}
	k.gatherScale(rows)
	r.shift.Variance(k.scale, k.scaleRows[0], first, y)
	r.shift.Variance(k.applied, k.scaleRows[1], first, y)
	r.shift.Signal(k.coherent, k.scaleRows[2], first, y)
	k.scaleOf(0, len(k.scale))
}

// gatherScale lists the rows of the error scale.
func (k *rectifyWorker) gatherScale(rows []*decodedRow) {
	for i := range k.scaleRows {
		k.scaleRows[i] = k.scaleRows[i][:0]
	}
	for _, d := range rows {
		for i, row := range [][]float32{d.scale, d.applied, d.coherent} {
			k.scaleRows[i] = append(k.scaleRows[i], row)
		}
	}
}

// scaleOf makes factors of scale and applied in columns x0..x1-1, which were straightened
// times variance: those of a column without variance are 1 and 0.
func (k *rectifyWorker) scaleOf(x0, x1 int) {
	for x := x0; x < x1; x++ {
		v := k.variance[x]
		if !(v > 0) {
			k.scale[x], k.applied[x], k.coherent[x] = 1, 0, 0
			continue
		}
		k.scale[x] /= v
		k.applied[x] /= v
		k.coherent[x] = max(0, k.coherent[x])
	}
}

// scaleVoxels gives the voxels of element j their error scale, that of the column in
// their middle, and their variances what of it is sure, and what the restoration of lost
// rows does to this element. Of errors that pixels share, a voxel of w pixels has w^2.
// SCALE is what the variance was multiplied by, and where that is 1 the q measured.
func (r *rectifier) scaleVoxels(k *rectifyWorker, s *spectra, at, j int) {
	scales, variances := s.scale[at:at+r.voxels], s.variance[at:at+r.voxels]
	own := float32(1)
	if r.byElement != nil {
		own = r.byElement[j]
		for l := range variances {
			variances[l] *= own
		}
	}
	if !r.scaled {
		return // s.scale is 1 from the start
	}
	edges := k.edges[:len(scales)+1]
	applied, coherent := k.applied[:len(k.scale)], k.coherent[:len(k.scale)]
	for l, v := range variances {
		middle := (edges[l]+edges[l+1])/2 + 0.5
		x := int(middle)
		if !(middle >= 0) || uint(x) >= uint(len(applied)) || !(v > 0) {
			scales[l] = 1
			continue
		}
		factor := applied[x]
		if c := coherent[x]; c > 0 {
			width := float32(edges[l+1] - edges[l])
			factor += c * own * width * width / v
		}
		if factor > 1+1e-4 { // more than rounding
			scales[l] = factor
			variances[l] = v * factor
		} else {
			scales[l] = k.scale[x]
		}
	}
}
