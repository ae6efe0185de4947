package calib

// flatRow is one row within a strip of the flat cube: voxel l of element j is at
// at + l stride + j.
type flatRow struct {
	signal, variance []float32
	flags            []Flag
	at, stride       int
	weights          []float64 // of the elements added, [voxel][element], once fitSlit was there
}

// addRow fits s of row y to the template and adds the row to the efficiency's sums.
func (f *FlatFit) addRow(y int, r flatRow, j0, j1 int) {
	f.fitSlit(y, r, j0, j1)
	slit := make([]float64, j1-j0)
	for j := range slit {
		at := y*f.elements + j0 + j
		if f.fullyLit(at) && f.slitBottom[at] > 0 {
			slit[j] = f.slitTop[at] / f.slitBottom[at]
		}
	}
	for l, lamp := range f.lamp {
		if lamp == 0 {
			continue
		}
		from := r.at + l*r.stride
		to := l * f.elements
		weights := r.weights[l*(j1-j0):][:j1-j0]
		for j := j0; j < j1; j++ {
			w := weights[j-j0]
			if u := slit[j-j0] * lamp; u > 0 && w > 0 {
				f.bandTop[to+j] += w * u * float64(r.signal[from+j])
				f.bandBottom[to+j] += w * u * u
			}
		}
	}
}

// fitSlit sets the sums of row y.
func (f *FlatFit) fitSlit(y int, r flatRow, j0, j1 int) {
	top := f.slitTop[y*f.elements:][:f.elements]
	bottom := f.slitBottom[y*f.elements:][:f.elements]
	clear(top[j0:j1])
	clear(bottom[j0:j1])
	for l := range f.lamp {
		from := r.at + l*r.stride
		template := f.template[l*f.elements:][:f.elements]
		weights := r.weights[l*(j1-j0):][:j1-j0]
		for j := j0; j < j1; j++ {
			t := float64(template[j])
			w := r.weight(from + j)
			weights[j-j0] = w
			if w > 0 {
				top[j] += w * t * float64(r.signal[from+j])
				bottom[j] += w * t * t
			}
		}
	}
}

// weight is 1/variance of a good voxel, else 0.
func (r *flatRow) weight(i int) float64 {
	if v := r.variance[i]; r.flags[i] == 0 && v > 0 && r.signal[i] == r.signal[i] {
		return 1 / float64(v)
	}
	return 0
}

// fullyLit tells whether the row and element at index [row][element] is.
func (f *FlatFit) fullyLit(at int) bool {
	return f.lit == nil || float64(f.lit[at]) >= f.rule.FullyLit
}
