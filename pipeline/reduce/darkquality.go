package reduce

import "math"

// darkChi2 sums, over dark columns and good pixels, squared decodes and their
// variances, and counts them. The sums are kept apart because a variance that was
// estimated from few electrons scatters: the mean of squares over such variances is
// above 1 though all is well, the ratio of the sums is not.
type darkChi2 struct {
	square, variance float64
	terms            int
}

func (c *darkChi2) add(o darkChi2) {
	c.square += o.square
	c.variance += o.variance
	c.terms += o.terms
}

// restoredSample is the place of a sample that was restored: detector column and row (the
// line), and code row.
type restoredSample struct {
	column, line uint32
	row          uint16
}

// blockQuality is what a block of pixels adds to the figures of its row.
type blockQuality struct {
	dark     darkChi2
	pulls    darkPulls // of sampled pixels
	restored int       // samples
	// hits are those among them that cosmic rays struck, doubtful the pixels with hits
	// that cannot be told; samples are the restored ones but those of lost rows.
	hits, doubtful int
	samples        []restoredSample
	// steps is, by code row, the sum over sampled pixels of the square of the row's part
	// in their dark residuals; noise is the sum of the variances of one sample of theirs.
	steps []float64
	noise float64
}

// unmeasured stands for the variance of a pixel whose dark decodes tell nothing of it.
const unmeasured = -1

// stepEvery: of every so many pixels of a row the steps' parts in the residuals are
// looked at, which costs v multiplications a dark column.
const stepEvery = 16

// judge compares a block's dark decodes with their variance, into what out keeps of them
// for the error scale and the pedestal, and into q.
func (d *decoder) judge(w *decodeWorker, out *decodedRow, x0, n int, q *blockQuality) {
	measured, expected, pedestal := out.measured[x0:x0+n], out.expected[x0:x0+n], out.pedestal[x0:x0+n]
	g := len(d.darkColumns)
	if g == 0 || len(d.scale.lost) > 0 && !d.repair.restores() {
		for p := range measured {
			measured[p], expected[p], pedestal[p] = unmeasured, 1, 0
		}
		return
	}
	d.sumDark(w, out, x0, n)
	d.sumAlong(w, out.along[x0:x0+n], n)
	share := d.repair.darkShare()
	blind := d.repair != nil && d.repair.pedestal
	flags := out.flags[x0 : x0+n]
	for p := range measured {
		mean := w.darkSum[p] / float64(g)
		square, variance := w.darkSquare[p], w.darkVariance[p]*share
		if blind {
			square -= mean * w.darkSum[p]
		}
		measured[p], expected[p], pedestal[p] = unmeasured, float32(w.darkVariance[p]/float64(g)), 0
		if flags[p] != 0 {
			continue
		}
		measured[p] = float32(square / (share * float64(g)))
		if blind && p+1 < n {
			out.along[x0+p] -= float32(mean * w.darkSum[p+1])
		}
		out.along[x0+p] /= float32(share * float64(g))
		if blind {
			pedestal[p] = float32(mean)
		}
		q.dark.square += square
		q.dark.variance += variance
		q.dark.terms += g
		if (x0+p)%stepEvery != out.y%stepEvery {
			continue
		}
		if !blind {
			mean = 0
		}
		q.pulls.count(w, d.darkColumns, p, n, mean, math.Sqrt(variance/float64(g)))
		if d.repair != nil {
			d.judgeSteps(w, p, n, float64(expected[p]), q)
		}
	}
}

// sumDark sums each pixel's dark decodes, their squares and their variances.
func (d *decoder) sumDark(w *decodeWorker, out *decodedRow, x0, n int) {
	sum, square, variance := w.darkSum[:n], w.darkSquare[:n], w.darkVariance[:n]
	clear(sum)
	clear(square)
	clear(variance)
	for _, column := range d.darkColumns {
		for p, v := range w.decoded[column*n : (column+1)*n] {
			x := float64(v)
			sum[p] += x
			square[p] += x * x
		}
		if !d.code.VarianceUniform() {
			for p, v := range w.variance[column*n : (column+1)*n] {
				variance[p] += float64(v)
			}
		}
	}
	if d.code.VarianceUniform() {
		for p, v := range out.variance[0][x0 : x0+n] {
			variance[p] = float64(v) * float64(len(d.darkColumns))
		}
	}
}

// sumAlong sums the products of each pixel's dark decodes with those of the next pixel
// of the block.
func (d *decoder) sumAlong(w *decodeWorker, along []float32, n int) {
	clear(along)
	for _, column := range d.darkColumns {
		row := w.decoded[column*n : (column+1)*n]
		for p := 1; p < n; p++ {
			along[p-1] += row[p-1] * row[p]
		}
	}
}

// judgeSteps adds a pixel's residual, projected on each code row. variance is that of
// its elements.
func (d *decoder) judgeSteps(w *decodeWorker, p, n int, variance float64, q *blockQuality) {
	w.residual = w.residual[:0]
	for _, column := range d.repair.restorer.Columns() {
		w.residual = append(w.residual, float64(w.decoded[column*n+p]))
	}
	d.repair.restorer.Project(w.projected, w.residual)
	for i, z := range w.projected {
		q.steps[i] += z * z
	}
	q.noise += variance / (d.darkQuiet() * d.repair.meanRatio) * d.scale.meanQuiet()
}

// darkQuiet is the variance of a dark decode of dark samples, in units of one's.
func (d *decoder) darkQuiet() float64 {
	if d.code.VarianceUniform() {
		_, closed := d.code.Code().InverseEntries()
		return closed * closed * d.scale.quietSum
	}
	sum := 0.0
	for _, column := range d.darkColumns {
		sum += d.quietSum[column]
	}
	return sum / float64(len(d.darkColumns))
}
