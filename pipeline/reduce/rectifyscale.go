package reduce

import "math"

// straightenScale takes the error scale of row y along the trace, with the weights of
// its variance.
func (r *rectifier) straightenScale(k *rectifyWorker, w *window, first, y int) {
	if !r.scaled {
		return
	}
	k.scaleRows[0], k.scaleRows[1] = k.scaleRows[0][:0], k.scaleRows[1][:0]
	for _, d := range w.rows {
		k.scaleRows[0] = append(k.scaleRows[0], d.scale)
		k.scaleRows[1] = append(k.scaleRows[1], d.applied)
	}
	r.shift.Variance(k.scale, k.scaleRows[0], first, y)
	r.shift.Variance(k.applied, k.scaleRows[1], first, y)
}

// scaleVoxels gives the voxels of element j their error scale, that of the column in
// their middle, and multiplies their variances by it where it is sure, and by what the
// restoration of lost rows does to this element.
func (r *rectifier) scaleVoxels(k *rectifyWorker, at, j int) {
	scales, variances := k.scales[at:at+r.grid.Count], k.variances[at:at+r.grid.Count]
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
		if x < 0 || x >= len(k.scale) || !(k.variance[x] > 0) {
			continue
		}
		scales[l] = k.scale[x] / k.variance[x]
		variances[l] *= k.applied[x] / k.variance[x]
	}
}
