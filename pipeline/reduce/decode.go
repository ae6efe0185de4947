package reduce

import "mirrorloom/hadamard"

// blockPixels is the number of pixels decoded together: a block of all slots
// and its result stay in the second-level cache (2 x 127 x 272 floats are 276
// kB; at v = 1023 a little above 2 MB). 272 floats are 17 cache lines: an odd
// number, so that the rows of a block do not all fall into the same few places of
// the cache (hadamard.Decoder.Decode).
const blockPixels = 272

// decoder turns strips of science frames into decoded rows.
type decoder struct {
	code    *hadamard.Decoder
	columns int
	slots   int
	// elementColumns and darkColumns are the code columns of the elements, in
	// field order, and of the dark ones.
	elementColumns, darkColumns []int
	k                           float64
	// slots says how the frames of a code row make its sample.
	scale slotScale
	// quietSum is, by code column, the variance of a decode of dark samples in
	// units of one's; nil where all columns have the same.
	quietSum []float64
	// photonExcess as in camera.
	photonExcess float64
	// neighbours takes out what open neighbours lend each other; nil for nothing.
	neighbours *neighbourTerm
	// repair restores samples from the dark columns; nil for nothing.
	repair *repair
	// terms are taken out of decoded blocks; nil for none.
	terms *slotTerms
	// shines tells on which detector rows mirrors stuck on shine; nil for none.
	shines func(y int) bool
}

// sumQuiet fills in quietSum: b^2 sum(w) + (a^2-b^2) sum_i(W_ij w_i) for weights w,
// those of noise without light.
func (d *decoder) sumQuiet() {
	code := d.code.Code()
	open, closed := code.InverseEntries()
	d.quietSum = make([]float64, d.slots)
	for j := range d.quietSum {
		for i, weight := range d.scale.quiet {
			entry := closed
			if code.Bit(i, j) == 1 {
				entry = open
			}
			d.quietSum[j] += entry * entry * weight
		}
	}
}

// decodeWorker is the scratch memory of one worker.
type decodeWorker struct {
	samples, decoded, variance, smooth []float32
	base                               []float32
	sum, square, drift                 []float64
	size, slope                        []float32 // of the neighbour term
	free                               []float32 // a block freed of that term
	terms                              *termWork // of the throughput's terms
	raw                                []float32 // a block as decoded, before anything is restored
	pursuit                            *pursuitWork
	missing                            []float32 // what lost rows lack, [row][pixel]
	growth                             []float64 // of variance by restored samples
	hits                               hits
	darkSum, darkSquare, darkVariance  []float64 // of each pixel's dark decodes
	residual, projected                []float64 // of one pixel: dark decodes, by step
	white                              []float64 // mean variance of each pixel's samples
}

func (d *decoder) newWorker() *decodeWorker {
	n := d.block()
	w := &decodeWorker{
		samples: make([]float32, d.slots*n), decoded: make([]float32, d.slots*n),
		base: make([]float32, n), sum: make([]float64, n), square: make([]float64, n), drift: make([]float64, n),
		size: make([]float32, n), slope: make([]float32, n), growth: make([]float64, n),
		darkSum: make([]float64, n), darkSquare: make([]float64, n), darkVariance: make([]float64, n), projected: make([]float64, d.slots),
	}
	if d.repair.restores() {
		w.missing = make([]float32, len(d.scale.lost)*n)
		if d.neighbours != nil {
			w.free = make([]float32, d.slots*n)
		}
	}
	if d.terms != nil {
		w.terms = d.terms.newWork(n)
	}
	if d.repair != nil {
		w.pursuit = d.repair.pursuit.newWork(n)
		if d.repair.restores() || d.neighbours != nil || d.repair.weights != nil {
			w.raw = make([]float32, d.slots*n)
		}
	}
	if !d.code.VarianceUniform() {
		w.variance, w.smooth, w.white = make([]float32, d.slots*n), make([]float32, d.slots*n), make([]float64, n)
	}
	return w
}

// block is the number of pixels of a block: a whole row where the variance is
// smoothed along it.
func (d *decoder) block() int {
	if !d.code.VarianceUniform() {
		return d.columns
	}
	return min(blockPixels, d.columns)
}

func (d *decoder) blocks() int { return (d.columns + d.block() - 1) / d.block() }

// run decodes block b of row y into out and into the element cube's planes, if
// there are any, and adds to the figures of the row.
func (d *decoder) run(w *decodeWorker, s *strip, y, b int, out *decodedRow, q *blockQuality) {
	x0 := b * d.block()
	x1 := min(x0+d.block(), d.columns)
	n := x1 - x0
	at := (y-s.y0)*d.columns + x0
	quiet := s.quiet[y-s.y0][x0:x1]
	d.load(w, s, at, n)
	d.decode(w, s, at, n, x0, y, q)
	uniform := d.code.VarianceUniform()
	if uniform {
		d.uniformVariance(out.variance[0][x0:x1], w, s, at, quiet)
	} else {
		d.ownVariances(w, s, at, n, quiet)
	}
	for j, col := range d.elementColumns {
		copy(out.signal[j][x0:x1], w.decoded[col*n:(col+1)*n])
		if !uniform {
			copy(out.variance[j][x0:x1], w.variance[col*n:(col+1)*n])
		}
	}
	copy(out.flags[x0:x1], s.flags[at:at+n])
	for p, v := range s.levelVariance[at : at+n] {
		out.common[x0+p] = float32(float64(v) / (d.k * d.k))
	}
	if !uniform {
		d.pixelVariance(out.pixel[x0:x1], w, s, at, quiet)
	}
	s.keep(w, at, n, out, x0, uniform)
	d.judge(w, out, x0, n, q)
}

// decode turns the loaded block into columns, restores what is missing and takes out
// the neighbour term. What was restored is counted in q.
func (d *decoder) decode(w *decodeWorker, s *strip, at, n, x0, y int, q *blockQuality) {
	d.code.Decode(w.decoded, w.samples, n, n)
	if d.terms != nil {
		d.terms.correct(d, w, n, x0, y)
	}
	raw := w.decoded
	if w.raw != nil {
		raw = w.raw
		copy(raw, w.decoded[:d.slots*n])
	}
	for p := range w.growth {
		w.growth[p] = 1
	}
	if d.neighbours != nil {
		d.neighbours.sizes(w.size, w.slope, x0, y, n)
	}
	switch {
	case d.repair.restores():
		d.restoreLost(w, n)
		q.restored = len(d.scale.lost) * n
	case d.neighbours != nil:
		d.neighbours.pairs.Correct(w.decoded, w.size, w.slope, n, n)
	}
	if d.repair == nil {
		return
	}
	if d.repair.weights != nil {
		d.repair.weights.Apply(w.decoded, n, n)
	}
	if d.repair.pursuit != nil {
		q.doubtful = d.pursue(w, s, at, n, s.quiet[y-s.y0][x0:x0+n])
		d.addFound(w, n)
	}
	d.gatherHits(w, raw, n)
	d.restoreHits(w, s, at, n, x0, y, q)
}

// load copies a block of all slots, less its bias, dark current, level and all-off
// light, into the worker's memory, and sums over the slots what the variances need.
// The bias is taken off before the sums are: the level's light has photon noise as
// well. Bias, dark and offset were in the frames before their factors were applied and
// the all-off light is that of a corrected frame, so that
//
//	sample = mean(factor raw) - gain base - shift - off
func (d *decoder) load(w *decodeWorker, s *strip, at, n int) {
	clear(w.sum[:n])
	clear(w.square[:n])
	clear(w.drift[:n])
	base, off := s.base[at:at+n], s.off[at:at+n]
	both := w.base[:n]
	for p, v := range base {
		both[p] = v + off[p]
	}
	for i := range d.slots {
		if d.scale.isLost(i) {
			continue
		}
		row := w.samples[i*n : (i+1)*n]
		raw := s.slot(i)[at : at+n]
		weight := d.scale.light[i]
		if gain, shift := float32(d.scale.gain[i]), float32(d.scale.shift[i]); gain == 1 && shift == 0 {
			for p, v := range raw {
				net := v - both[p]
				row[p] = net
				w.sum[p] += weight * float64(net)
			}
		} else {
			for p, v := range raw {
				net := v - gain*base[p] - shift - off[p]
				row[p] = net
				w.sum[p] += weight * float64(net)
			}
		}
		if u := d.scale.uncertain[i]; u > 0 {
			for p, net := range row {
				light := float64(net + off[p])
				w.drift[p] += u * light * light
			}
		}
	}
	if d.repair != nil {
		d.collectHits(w, s, at, n)
	}
	if len(d.scale.lost) > 0 {
		d.fillLost(w, n)
	}
	if d.code.VarianceUniform() {
		d.addExtra(w, s, at, n)
	}
}

// fillLost puts the mean over the other slots into a lost one. What it is off
// by is as uncertain as one slot's light differs from another's: square keeps
// that variance, which goes into the pixel's.
func (d *decoder) fillLost(w *decodeWorker, n int) {
	there := float64(d.slots - len(d.scale.lost))
	for p := range n {
		var sum, square float64
		for i := range d.slots {
			if !d.scale.isLost(i) {
				v := float64(w.samples[i*n+p])
				sum += v
				square += v * v
			}
		}
		mean := sum / max(1, there)
		for _, i := range d.scale.lost {
			w.samples[i*n+p] = float32(mean)
		}
		if d.repair.restores() {
			continue // the variance grows by what is known of the restoration
		}
		w.square[p] = float64(len(d.scale.lost)) * max(0, square/max(1, there)-mean*mean)
	}
}

// uniformVariance is 4/(v+1)^2 sum(s^2) for every column, with s^2 of each
// sample from its unclipped value, plus what the frames' factors are uncertain by, and
// the variance of the level, which is common to all slots and decodes to 1/k of itself.
// An error of a step's factor goes as its row of the inverse, +-2/(v+1), into the
// columns.
func (d *decoder) uniformVariance(dst []float32, w *decodeWorker, s *strip, at int, quiet []float64) {
	_, closed := d.code.Code().InverseEntries()
	for p := range dst {
		dark := d.scale.quietSum * quiet[p]
		light := (1 + d.photonExcess) * (w.sum[p] + d.scale.lightSum*float64(s.level[at+p]))
		sum := max(dark+light, dark*varianceFloor) + w.square[p] + w.drift[p]
		dst[p] = float32(closed*closed*sum*d.grown(w, p) + float64(s.levelVariance[at+p])/(d.k*d.k))
	}
}

// grown is what restoration multiplies the mean variance of a pixel's elements by: that
// of its own samples and of those of lost rows together, or of the latter alone. The
// variance of a plain decode counts no noise of lost rows; that by which a pixel's own
// growth is reckoned does.
func (d *decoder) grown(w *decodeWorker, p int) float64 {
	switch {
	case d.repair == nil:
		return 1
	case w.growth[p] == 1:
		return d.repair.meanRatio
	}
	return w.growth[p] * float64(d.slots) / float64(d.slots-len(d.scale.lost))
}

// varianceFloor bounds the sum of variances from below, in units of that of
// dark samples: it is there for sums that noise took to nothing, and low enough
// that on a pixel without light, whose sum scatters around 1, it does not act.
const varianceFloor = 0.5

// ownVariances computes each column's variance where they differ: from the
// light that the decoded, smoothed elements predict for each slot, since a
// column of few samples would else weigh its own noise. As with equal variances
// only the sum is floored. Restored samples count as if they had been read, as noisily as
// the others; what restoring adds comes on top.
func (d *decoder) ownVariances(w *decodeWorker, s *strip, at, n int, quiet []float64) {
	for j := range d.slots {
		smoothRow(w.smooth[j*n:(j+1)*n], w.decoded[j*n:(j+1)*n])
	}
	d.code.Predict(w.variance, w.smooth, n, n)
	for i := range d.slots {
		row := w.variance[i*n : (i+1)*n]
		dark, bright := d.scale.quiet[i], d.scale.light[i]
		if d.scale.isLost(i) && d.repair.restores() {
			dark, bright = d.scale.meanQuiet(), d.scale.meanLight()
		}
		for p := range row {
			light := float64(row[p]) + float64(s.level[at+p])
			v := dark*quiet[p] + (1+d.photonExcess)*bright*light
			row[p] = float32(v + d.scale.uncertain[i]*light*light)
		}
	}
	if !d.repair.restores() {
		for _, i := range d.scale.lost {
			for p := range n {
				w.variance[i*n+p] = float32(w.square[p] / float64(len(d.scale.lost)))
			}
		}
	}
	d.addExtra(w, s, at, n)
	copy(w.smooth, w.variance)
	clear(w.white)
	for i := range d.slots {
		for p, s2 := range w.smooth[i*n : (i+1)*n] {
			w.white[p] += float64(s2) / float64(d.slots)
		}
	}
	d.code.Variance(w.variance, w.smooth, n, n, 0)
	d.addSpread(w, n)
	for j := range d.slots {
		row := w.variance[j*n : (j+1)*n]
		for p, v := range row {
			floor := varianceFloor * quiet[p] * d.quietSum[j]
			row[p] = float32(max(float64(v), floor) + float64(s.levelVariance[at+p])/(d.k*d.k))
		}
	}
}

// pixelVariance fills in decodedRow.pixel after ownVariances: A's squares add up to
// ReadNoiseVariance in each row and in each column.
func (d *decoder) pixelVariance(dst []float32, w *decodeWorker, s *strip, at int, quiet []float64) {
	code := d.code.Code()
	unit := code.Design().ReadNoiseVariance()
	for p := range dst {
		if code.Family() == hadamard.SlitScan {
			dst[p] = float32(quiet[p] + (1+d.photonExcess)*float64(s.level[at+p]))
			continue
		}
		least := varianceFloor * quiet[p] * d.scale.meanQuiet()
		dst[p] = float32(unit*max(w.white[p], least) + float64(s.levelVariance[at+p])/(d.k*d.k))
	}
}

// addSpread adds to the variances of a block what restoring its lost rows and struck samples
// adds.
func (d *decoder) addSpread(w *decodeWorker, n int) {
	if d.repair == nil || len(w.hits.list) == 0 && !d.repair.restores() {
		return
	}
	add := func(p int, spread func(j int) float64) {
		for j := range d.slots {
			w.variance[j*n+p] += float32(w.white[p] * spread(j))
		}
	}
	if d.repair.restores() {
		for p := range n {
			if w.growth[p] == 1 {
				add(p, func(j int) float64 { return d.repair.lost.Spread[j] })
			}
		}
	}
	m := len(w.hits.list)
	for i, one := range w.hits.list {
		if one.growth != 0 {
			add(one.pixel, func(j int) float64 { return w.hits.spread[j*m+i] })
		}
	}
}

// smoothRow averages over smoothPixels columns, fewer at the ends.
func smoothRow(dst, src []float32) {
	const reach = smoothPixels / 2
	for x := range dst {
		first, last := max(0, x-reach), min(len(src)-1, x+reach)
		sum := float32(0)
		for _, v := range src[first : last+1] {
			sum += v
		}
		dst[x] = sum / float32(last-first+1)
	}
}

// smoothPixels weighs two needs: narrow enough to follow a line, wide enough
// that a sample's own noise is a small part of its variance.
const smoothPixels = 7
