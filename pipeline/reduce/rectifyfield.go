package reduce

import (
	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// Where the field is shifted by wavelength, a voxel is made of eight elements' light, each
// gathered from the rows where it lies: rows by the weights of the trace and the shift
// together, then wavelengths, then elements. Detector pixels are weighed once each; the
// responses are divided out between, where the light passed them.

// shiftedGroup elements are made together: those that they are made of beyond them are
// made twice.
const shiftedGroup = 64

// reachLimit is the weight above which a flag is handed on (the cube's contract).
const reachLimit = 0.1

// fieldWorker is the memory that a worker needs for it.
type fieldWorker struct {
	gather *calib.Gather
	// source holds the spectra of the elements that a group is made of.
	source   spectra
	products []float32 // scale times variance, [element][voxel]
	signals  [][]float32
	flags    [][]calib.Flag
	mixed    calib.RowFlags
}

// shiftBy has the rectifier shift the light. It must be called before it is used.
func (r *rectifier) shiftBy(f *calib.ShiftField) {
	r.field, r.group = f, min(shiftedGroup, r.elements)
	most := 0
	for j0 := 0; j0 < r.elements; j0 += r.group {
		first, last := r.sources(j0, min(j0+r.group, r.elements))
		most = max(most, last-first+1)
	}
	n := most * r.voxels
	for i := range r.workers {
		k := &r.workers[i]
		k.out = newSpectra(r.group * r.voxels)
		k.field = &fieldWorker{gather: f.NewGather(), source: newSpectra(n), products: make([]float32, n)}
	}
}

// fieldBytes is the memory of the workers' spectra.
func (r *rectifier) fieldBytes() int64 {
	bytes := int64(0)
	for _, k := range r.workers {
		if k.field != nil {
			bytes += int64(len(k.out.signal)+len(k.field.source.signal))*bytesVoxel + int64(len(k.field.products))*bytesFloat
		}
	}
	return bytes
}

// sources is the range of elements, inclusive, of which j0..j1-1 are made.
func (r *rectifier) sources(j0, j1 int) (first, last int) {
	first, last = r.elements, -1
	for j := j0; j < j1; j++ {
		f, l := r.field.Sources(j)
		first, last = min(first, f), max(last, l)
	}
	return first, last
}

// rectifyShifted makes the voxels of elements j0.. of one row.
func (r *rectifier) rectifyShifted(k *rectifyWorker, out *outStrip, w *window, row, j0 int) {
	y, j1 := out.y0+row, min(j0+r.group, r.elements)
	from, to := r.sources(j0, j1)
	rows, first := r.spanned(w, y)
	if k.y != y {
		k.y = y
		k.places.SetRow(float64(y))
		k.bitRows = k.bitRows[:0]
		for _, d := range rows {
			k.bitRows = append(k.bitRows, d.flags)
		}
		k.gatherScale(rows)
	}
	for s := from; s <= to; s++ {
		r.source(k, rows, first, y, s, (s-from)*r.voxels, s >= j0 && s < j1)
	}
	k.field.fill(r.voxels, to-from+1)
	for j := j0; j < j1; j++ {
		r.mix(k, j, from, to, (j-j0)*r.voxels)
	}
	r.store(k, out, row, j0, j1)
}

// source makes the spectrum of element s where the light of trace row y lies, at index at
// of the worker's sources. own tells that this group is the one to take note of it.
func (r *rectifier) source(k *rectifyWorker, rows []*decodedRow, first, y, s, at int, own bool) {
	f := k.field
	k.collect(rows, s)
	k.places.Places(k.edges, float64(s))
	r.field.Set(f.gather, y, k.edges)
	f.gather.Signal(k.signal, k.signals, first)
	f.gather.Variance(k.variance, k.vars, first)
	f.gather.Flags(&k.flags, k.bitRows, first)
	if r.scaled {
		f.gather.Variance(k.scale, k.scaleRows[0], first)
		f.gather.Variance(k.applied, k.scaleRows[1], first)
		f.gather.Signal(k.coherent, k.scaleRows[2], first)
		k.scaleOf(f.gather.Columns())
	}
	r.columns.Resample(calib.Voxels{
		Signal: f.source.signal[at:], Variance: f.source.variance[at:], Flags: f.source.flags[at:], Stride: 1,
	}, k.signal, k.variance, &k.flags, k.edges)
	r.scaleVoxels(k, &f.source, at, s)
	if r.extraRows(k, rows, s) {
		f.gather.Signal(k.extra, k.extras, first)
		r.addExtra(k, &f.source, at)
	}
	r.flattenShifted(k, y, s, at, own)
}

// flattenShifted is flatten for light that has passed other rows of the slit: its
// response is theirs, weighed as they are. It flags what rows without use reach.
func (r *rectifier) flattenShifted(k *rectifyWorker, y, s, at int, own bool) {
	f := k.field
	signal, variance, flags := f.source.signal[at:at+r.voxels], f.source.variance[at:at+r.voxels], f.source.flags[at:at+r.voxels]
	if r.response != nil {
		copy(k.before, variance)
	}
	for l := range signal {
		first, weights := r.field.Along(y, l)
		slit, noise, low := float32(0), float32(0), calib.Flag(0)
		for i, w := range weights {
			reaches := w > reachLimit || w < -reachLimit
			at := (first+i)*r.elements + s
			if reaches {
				flags[l] |= r.usage.flags[at]
				if r.low != nil {
					flags[l] |= r.low[at]
				}
			}
			if r.response == nil {
				continue
			}
			slit += w * r.response.Slit[at]
			noise += w * w * r.response.SlitVariance[at]
			if reaches {
				low |= r.response.SlitFlags[at]
			}
		}
		if r.response == nil {
			continue
		}
		b := s*r.voxels + l
		inverse := 1 / (slit * r.response.Band[b])
		v := signal[l] * inverse
		p := float32(r.pixelVariance) * inverse * inverse * signal[l] * signal[l]
		signal[l] = v
		variance[l] = variance[l]*inverse*inverse + p + v*v*(noise+r.response.BandVariance[b])
		flags[l] |= low | r.response.BandFlags[b]
		k.before[l] = variance[l]/(k.before[l]*inverse*inverse) - 1
	}
	if own && r.response != nil && s%addedEvery == 0 {
		r.added[y*r.elements+s] = medianOf(k.before)
	}
}

// fill puts harmless values where n sources have none: the next element's. Flags stay,
// and void what the source reaches with more than 0.1.
func (f *fieldWorker) fill(voxels, n int) {
	signal, variance, scale := f.source.signal, f.source.variance, f.source.scale
	take := func(to, from int) {
		signal[to], variance[to], scale[to] = signal[from], variance[from], scale[from]
	}
	for i := voxels; i < n*voxels; i++ {
		if signal[i] != signal[i] {
			take(i, i-voxels)
		}
	}
	for i := (n-1)*voxels - 1; i >= 0; i-- {
		if signal[i] != signal[i] {
			take(i, i+voxels)
		}
	}
	for i, v := range signal[:n*voxels] {
		if v != v { // no element has light of this wavelength
			signal[i], variance[i], scale[i] = 0, 0, 1
		}
		f.products[i] = scale[i] * variance[i]
	}
}

// mix makes the spectrum of element j, at index at of the worker's group, of the sources
// from..to.
func (r *rectifier) mix(k *rectifyWorker, j, from, to, at int) {
	f := k.field
	signal, variance := k.out.signal[at:at+r.voxels], k.out.variance[at:at+r.voxels]
	scale, flags := k.out.scale[at:at+r.voxels], k.out.flags[at:at+r.voxels]
	r.field.Mix(signal, f.rows(f.source.signal, r.voxels, from, to), from, j)
	sources := f.rows(f.source.variance, r.voxels, from, to)
	r.field.MixVariance(variance, sources, from, j)
	r.field.MixVariance(scale, f.rows(f.products, r.voxels, from, to), from, j)
	f.flags = f.flags[:0]
	for i := range to - from + 1 {
		f.flags = append(f.flags, f.source.flags[i*r.voxels:(i+1)*r.voxels])
	}
	r.field.MixFlags(&f.mixed, f.flags, from, j)
	for l, b := range f.mixed.Bits {
		flags[l] = b
		if variance[l] > 0 {
			scale[l] /= variance[l]
		} else {
			scale[l] = 1
		}
		if b&product.FlagNoData != 0 {
			signal[l], variance[l] = nan32, nan32
		}
	}
}

// rows cuts spectra of elements from..to.
func (f *fieldWorker) rows(all []float32, voxels, from, to int) [][]float32 {
	f.signals = f.signals[:0]
	for i := range to - from + 1 {
		f.signals = append(f.signals, all[i*voxels:(i+1)*voxels])
	}
	return f.signals
}
