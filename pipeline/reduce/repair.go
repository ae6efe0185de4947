package reduce

import (
	"math"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// The noise may grow by restoration to troubledGrowth without a word, and to
// hopelessGrowth at all.
const (
	troubledGrowth = 2.0
	hopelessGrowth = 5.0
)

// repair is what the dark columns are used for in decoding; nil where the recipe or too
// few of them forbid it.
type repair struct {
	restorer *hadamard.Restorer
	// lost restores the code rows that have no frame; nil where it cannot be done. With
	// all rows at hand it has none to restore.
	lost *hadamard.LostRows
	// weights decode slots of unequal depth better than the plain inverse, by more than
	// worthwhileGain; nil where that is not so.
	weights *hadamard.Reweighting
	// left are the checks that lost rows leave.
	left *hadamard.Checks
	// pursuit finds samples that cosmic rays struck; nil where that is not asked for.
	pursuit *pursuit
	// most is how many struck samples of a pixel are restored.
	most int
	// share is, by code row, the variance of its part in the dark decodes in units of a
	// sample's; 0 for lost rows.
	share []float64
	// pedestal: there are no frames of the light without any open mirror, so that the
	// mean of the dark decodes stands for it.
	pedestal bool
	// meanRatio is the mean of lost.Ratio over the elements, and byElement the ratio of
	// each to it; nil where they are all the same.
	meanRatio float64
	byElement []float32
	// additive: variances differ between the elements, as with codes that are no
	// S-matrices. What restoring adds to an element's is then Spread times the mean
	// variance of a sample, and the ratios are not used.
	additive bool
}

// newRepair prepares for slots of these frames. lack, if the lost rows cannot be
// restored, says why. uniform: all elements of a pixel have the same variance.
func newRepair(checks *hadamard.Checks, elements []int, scale *slotScale, pedestal, uniform bool) (p *repair, lack error) {
	if pedestal {
		checks = checks.WithoutPedestal()
	}
	// Beyond a quarter, noise grows and singular sets are no longer rare.
	p = &repair{restorer: checks.NewRestorer(), most: len(checks.Columns()) / 4, pedestal: pedestal, meanRatio: 1, additive: !uniform}
	left, err := checks.WithoutRows(scale.lost)
	if err != nil {
		return nil, err
	}
	p.left = left
	seen := left.Projector()
	for i := range scale.quiet {
		p.share = append(p.share, seen.At(i, i))
	}
	if p.lost, lack = p.restorer.Lost(scale.lost, scale.quiet); lack != nil {
		return p, lack
	}
	if p.additive {
		return p, nil
	}
	ratio := p.lost.Ratio
	if weighted, ok := p.weigh(checks, scale); ok {
		ratio = weighted
	}
	if p.weights == nil && len(scale.lost) == 0 {
		return p, nil
	}
	p.meanRatio = 0
	for _, column := range elements {
		p.meanRatio += ratio[column] / float64(len(elements))
	}
	for _, column := range elements {
		p.byElement = append(p.byElement, float32(ratio[column]/p.meanRatio))
	}
	return p, nil
}

// worthwhileGain in variance is what weights must promise: their own cost is g
// multiplications a voxel.
const worthwhileGain = 1.02

// weigh prepares weights where slots hold different numbers of frames and it is worth
// while, and gives what then becomes of Ratio. A pedestal would pass through the
// weights, so that there are none where the dark columns have to find it.
func (p *repair) weigh(checks *hadamard.Checks, scale *slotScale) (ratio []float64, ok bool) {
	if p.pedestal {
		return nil, false
	}
	noise := slices.Clone(scale.quiet)
	low, high := math.Inf(1), 0.0
	for row := range noise {
		if scale.isLost(row) {
			noise[row] = math.Inf(1)
			continue
		}
		low, high = min(low, noise[row]), max(high, noise[row])
	}
	// Variances that differ by the frames' factors alone gain nothing.
	const differ = 1.2
	if high < differ*low {
		return nil, false
	}
	w, err := checks.Reweight(noise)
	if err != nil || p.lost.Growth < worthwhileGain*w.Growth {
		return nil, false
	}
	p.weights = w
	v := float64(len(noise))
	for _, growth := range w.ColumnGrowth {
		ratio = append(ratio, growth*v/(v-float64(len(scale.lost))))
	}
	return ratio, true
}

// restores tells whether lost rows are restored in every pixel.
func (p *repair) restores() bool { return p != nil && p.lost != nil && len(p.lost.Rows) > 0 }

// elementRatios are byElement, nil for nil.
func (p *repair) elementRatios() []float32 {
	if p == nil {
		return nil
	}
	return p.byElement
}

// lostFlag is the flag of every voxel where code rows have no frame.
func (d *decoder) lostFlag() int16 {
	switch {
	case len(d.scale.lost) == 0:
		return 0
	case d.repair.restores():
		return product.FlagRestored
	}
	return product.FlagLost
}

// bears tells whether a pixel with so many struck samples is to be restored.
func (p *repair) bears(struck int) bool { return p != nil && p.lost != nil && struck <= p.most }

// darkShare is the expected sum of squared dark decodes over g times the variance of
// the elements, or of the dark columns with all rows at hand where variances differ.
// Weights change the former alone.
func (p *repair) darkShare() float64 {
	switch {
	case p == nil || p.lost == nil:
		return 1
	case p.additive:
		return float64(p.left.G()) / float64(len(p.left.Columns()))
	case p.weights != nil:
		return p.lost.DarkShare * p.lost.Growth / p.weights.Growth
	}
	return p.lost.DarkShare
}

// settlePasses: each pass of settle leaves of what was missing the part that the
// neighbour term is of the light, 7 % at most.
const settlePasses = 3

// settle restores a block of n pixels, decoded as raw, and leaves it freed of the
// neighbour term. What is missing shows in dark decodes that are free of that term,
// and is added before the term is taken out: add is given the one, [code column][pixel],
// and adds to raw. free is memory of the size of raw.
func (d *decoder) settle(raw, free, size, slope []float32, n int, add func(free []float32)) {
	if d.neighbours == nil {
		add(raw)
		return
	}
	for range settlePasses {
		copy(free, raw)
		d.neighbours.pairs.Correct(free, size, slope, n, n)
		add(free)
	}
	d.neighbours.pairs.Correct(raw, size, slope, n, n)
}

// restoreLost restores the lost rows of a block of n pixels.
func (d *decoder) restoreLost(w *decodeWorker, n int) {
	lost := d.repair.lost
	missing := w.missing[:len(lost.Rows)*n]
	d.settle(w.decoded[:d.slots*n], w.free, w.size, w.slope, n, func(free []float32) {
		lost.Missing(missing, free, n, n)
		hadamard.AddReadings(d.code.Code(), w.decoded, lost.Rows, missing, n, n)
	})
}
