package reduce

import (
	"math"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// A sample is struck if its reading is not to be used: it is saturated, or next to a
// saturated one in its column, into which charge bleeds, or has no value. The reader
// puts a NaN in its place, and its reason into the strip's flags of struck samples. A
// pixel with few such samples is restored from its dark columns, one by one.
var missing32 = float32(math.NaN())

// hit is a pixel of a block with struck samples.
type hit struct {
	pixel int
	rows  []int // the struck code rows, and the lost ones
	// reason is the flag of a pixel that cannot be restored.
	reason calib.Flag
	// growth is what restoring multiplied the pixel's variance by; 0 for a pixel that
	// could not be restored.
	growth float64
}

// hits collects them, and restores them together: the pixels' columns lie side by side,
// [code row or column][hit].
type hits struct {
	list      []hit
	rows      []int // memory of their rows
	raw, free []float32
	size      []float32 // of the neighbour term
	slope     []float32
	residual  []float64
	repair    hadamard.Repair
	// spread is hadamard.Restorer.Spread where variances differ between elements, [code
	// column][hit]; column is that of one hit.
	spread, column []float64
}

// collectHits looks for struck samples in a block that was loaded, fills them with the
// pixel's mean, and sums again over the slots what the variances need. A pixel with too
// many of them gets their reason as a flag.
func (d *decoder) collectHits(w *decodeWorker, s *strip, at, n int) {
	h := &w.hits
	h.list, h.rows = h.list[:0], h.rows[:0]
	for p, reason := range s.struck[at : at+n] {
		if reason == 0 {
			continue
		}
		from := len(h.rows)
		for i := range d.slots {
			if v := w.samples[i*n+p]; v != v {
				h.rows = append(h.rows, i)
			}
		}
		rows := h.rows[from:]
		d.fillStruck(w, s.off[at+p], rows, n, p)
		flags := &s.flags[at+p]
		switch {
		case !d.repair.bears(len(rows)):
			*flags |= reason
		case *flags == 0:
			h.rows = append(h.rows, d.scale.lost...)
			h.list = append(h.list, hit{pixel: p, rows: h.rows[from:len(h.rows):len(h.rows)], reason: reason})
		}
	}
}

// fillStruck puts the mean of the other samples into a pixel's struck ones.
func (d *decoder) fillStruck(w *decodeWorker, off float32, rows []int, n, p int) {
	sum, there := 0.0, 0
	for i := range d.slots {
		if v := float64(w.samples[i*n+p]); !d.scale.isLost(i) && v == v {
			sum += v
			there++
		}
	}
	mean := float32(sum / float64(max(1, there)))
	for _, i := range rows {
		w.samples[i*n+p] = mean
	}
	w.sum[p], w.drift[p] = 0, 0
	for i := range d.slots {
		if d.scale.isLost(i) {
			continue
		}
		v := w.samples[i*n+p]
		w.sum[p] += d.scale.light[i] * float64(v)
		light := float64(v + off)
		w.drift[p] += d.scale.uncertain[i] * light * light
	}
}

// addFound adds the samples that the search found to the hits, pixel by pixel.
func (d *decoder) addFound(w *decodeWorker, n int) {
	h, found := &w.hits, w.pursuit.found
	for i := 0; i < len(found); {
		pixel, from := found[i].pixel, len(h.rows)
		for ; i < len(found) && found[i].pixel == pixel; i++ {
			h.rows = append(h.rows, found[i].hit.Row)
		}
		h.rows = append(h.rows, d.scale.lost...)
		h.list = append(h.list, hit{pixel: pixel, rows: h.rows[from:len(h.rows):len(h.rows)], reason: calib.BadPixel})
	}
}

// gatherHits copies the columns of the hits from raw, the block as decoded, side by side.
func (d *decoder) gatherHits(w *decodeWorker, raw []float32, n int) {
	h := &w.hits
	m := len(h.list)
	h.raw = growFloats(h.raw, d.slots*m)
	for j := range d.slots {
		for i, one := range h.list {
			h.raw[j*m+i] = raw[j*n+one.pixel]
		}
	}
}

// restoreHits restores the hits of a block and puts them back, freed of the neighbour
// term. Pixels that cannot be restored keep what they had and get their reason as a flag.
func (d *decoder) restoreHits(w *decodeWorker, s *strip, at, n, x0, y int, q *blockQuality) {
	h := &w.hits
	m := len(h.list)
	if m == 0 {
		return
	}
	h.size, h.slope = growFloats(h.size, m), growFloats(h.slope, m)
	if d.neighbours != nil {
		for i, one := range h.list {
			h.size[i], h.slope[i] = d.neighbours.at(x0+one.pixel, y)
		}
	}
	h.free = growFloats(h.free, d.slots*m)
	if d.repair.additive {
		h.spread, h.column = growFloats(h.spread, d.slots*m), growFloats(h.column, d.slots)
	}
	d.settle(h.raw, h.free, h.size, h.slope, m, func(free []float32) {
		for i := range h.list {
			d.restoreHit(w, i, m, free)
		}
	})
	for i := range h.list {
		one := &h.list[i]
		if one.growth == 0 {
			s.flags[at+one.pixel] |= one.reason
			continue
		}
		own := one.rows[:len(one.rows)-len(d.scale.lost)]
		q.restored += len(own)
		if s.struck[at+one.pixel] == 0 {
			q.hits += len(own)
		}
		for _, row := range own {
			q.samples = append(q.samples, restoredSample{column: uint32(x0 + one.pixel), line: uint32(y), row: uint16(row)})
		}
		s.flags[at+one.pixel] |= product.FlagRestored
		w.growth[one.pixel] = one.growth
		for j := range d.slots {
			w.decoded[j*n+one.pixel] = h.raw[j*m+i]
		}
	}
}

// restoreHit adds to hit i of m what its residual, freed of the neighbour term, shows to
// be missing, and to the light of its struck samples as well.
func (d *decoder) restoreHit(w *decodeWorker, i, m int, free []float32) {
	h := &w.hits
	one := &h.list[i]
	columns := d.repair.restorer.Columns()
	h.residual = h.residual[:0]
	for _, j := range columns {
		h.residual = append(h.residual, float64(free[j*m+i]))
	}
	one.growth = 0
	if !d.repair.restorer.Solve(&h.repair, one.rows, h.residual) || h.repair.Growth > hopelessGrowth*hopelessGrowth {
		return
	}
	one.growth = h.repair.Growth
	if d.repair.additive {
		d.repair.restorer.Spread(h.column, one.rows, &h.repair)
		for j, x := range h.column {
			h.spread[j*m+i] = x
		}
	}
	code := d.code.Code()
	open, closed := code.InverseEntries()
	for j := range d.slots {
		sum := 0.0
		for a, k := range one.rows {
			if code.Bit(k, j) == 1 {
				sum += open * h.repair.Missing[a]
			} else {
				sum += closed * h.repair.Missing[a]
			}
		}
		h.raw[j*m+i] += float32(sum)
	}
	for a, k := range one.rows {
		w.sum[one.pixel] += d.scale.light[k] * h.repair.Missing[a]
	}
}

// growFloats gives n floats, of x's memory if that suffices.
func growFloats[T float32 | float64](x []T, n int) []T {
	if cap(x) < n {
		return make([]T, n)
	}
	return x[:n]
}
