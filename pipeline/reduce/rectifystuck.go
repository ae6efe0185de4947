package reduce

import "mirrorloom/calib"

// collect takes element j from rows.
func (k *rectifyWorker) collect(rows []*decodedRow, j int) {
	k.signals, k.vars = k.signals[:0], k.vars[:0]
	for _, d := range rows {
		k.signals = append(k.signals, d.light(j))
		k.vars = append(k.vars, d.variance[min(j, len(d.variance)-1)])
	}
}

// extraRows takes the added variances of element j from rows; false where there
// are none.
func (r *rectifier) extraRows(k *rectifyWorker, rows []*decodedRow, j int) bool {
	k.extras = k.extras[:0]
	some := false
	for _, d := range rows {
		extra := k.none
		if whole := d.wholeOf(j); whole != nil {
			extra, some = whole.extra, true
		}
		k.extras = append(k.extras, extra)
	}
	if some && k.none == nil {
		n := len(k.signal)
		k.none, k.extra, k.added = make([]float32, n), make([]float32, n), newSpectra(r.voxels)
		return r.extraRows(k, rows, j)
	}
	return some
}

// addExtra adds them, straightened, to the variances of an element's voxels. Rows share
// the errors of what was put into them, so that they were straightened as light is.
func (r *rectifier) addExtra(k *rectifyWorker, s *spectra, at int) {
	for x, v := range k.extra {
		k.extra[x] = max(0, v)
	}
	a := &k.added
	r.columns.Resample(calib.Voxels{Signal: a.signal, Variance: a.variance, Flags: a.flags, Stride: 1}, k.signal, k.extra, &k.flags, k.edges)
	for l, v := range a.variance {
		if v > 0 { // not where there is no data
			s.variance[at+l] += v * max(1, s.scale[at+l])
		}
	}
}

// flagLow flags the voxels of an element and row most of whose mirrors do not move.
func (r *rectifier) flagLow(flags []calib.Flag, j, y int) {
	if r.low == nil || r.low[y*r.elements+j] == 0 {
		return
	}
	for l := range flags {
		flags[l] |= r.low[y*r.elements+j]
	}
}
