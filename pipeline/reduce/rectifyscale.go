package reduce

import "math"

// straightenScale takes the error scale of row y along the trace: with the weights of
// its variance, but with those of its signal for errors that neighbours share.
func (r *rectifier) straightenScale(k *rectifyWorker, w *window, first, y int) {
	if !r.scaled {
		return
	}
	for i := range k.scaleRows {
		k.scaleRows[i] = k.scaleRows[i][:0]
	}
	for _, d := range w.rows {
		for i, row := range [][]float32{d.scale, d.applied, d.coherent} {
			k.scaleRows[i] = append(k.scaleRows[i], row)
		}
	}
	r.shift.Variance(k.scale, k.scaleRows[0], first, y)
	r.shift.Variance(k.applied, k.scaleRows[1], first, y)
	r.shift.Signal(k.coherent, k.scaleRows[2], first, y)
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
	}
	for l := range scales {
		scales[l] = 1
		variances[l] *= own
		if !r.scaled {
			continue
		}
		x := int(math.Round((k.edges[l] + k.edges[l+1]) / 2))
		if x < 0 || x >= len(k.scale) || !(k.variance[x] > 0) || !(variances[l] > 0) {
			continue
		}
		width := float32(k.edges[l+1] - k.edges[l])
		factor := k.applied[x]/k.variance[x] + max(0, k.coherent[x])*own*width*width/variances[l]
		scales[l] = k.scale[x] / k.variance[x]
		if factor > 1+1e-4 { // more than rounding
			scales[l] = factor
			variances[l] *= factor
		}
	}
}
