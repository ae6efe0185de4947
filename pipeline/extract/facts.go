package extract

import (
	"context"
	"fmt"
	"math"
	"runtime"

	"mirrorloom/pipeline/parallel"
)

// SumFact tells what the errors of independent voxels would miss in a sum around a
// place: Ratio is the standard error over the naive one.
type SumFact struct {
	What  string
	Ratio float64
}

const (
	// factSide elements and rows are added up, and factVoxels wavelengths.
	factSide   = 5
	factVoxels = 10
	// factChannels around the middle of the good ones are looked at.
	factChannels = 60
	// factCoverage of the cells is good in a channel that counts.
	factCoverage = 0.9
)

// SumFacts computes them for sums around an element and row: of rows, of elements, of
// both, of wavelengths, and of a whole row. A Ratio is not a number where too little is
// good; there are none where the place is too near to the field's edge.
func (c *Cube) SumFacts(ctx context.Context, element, row int) ([]SumFact, error) {
	half := factSide / 2
	if element < half || element >= c.Elements-half || row < half || row >= c.Rows-half {
		return nil, nil
	}
	sums := []struct {
		what                                  string
		firstElement, lastElement, rows, band int
	}{
		{fmt.Sprintf("%d neighbouring rows", factSide), element, element, half, 0},
		{fmt.Sprintf("%d neighbouring elements", factSide), element - half, element + half, 0, 0},
		{fmt.Sprintf("%d neighbouring wavelengths of one voxel", factVoxels), element, element, 0, factVoxels},
		{fmt.Sprintf("%d × %d elements and rows, %d wavelengths", factSide, factSide, factVoxels), element - half, element + half, half, factVoxels},
		{fmt.Sprintf("all elements of a row, %d wavelengths", factChannels), 0, c.Elements - 1, 0, factChannels},
	}
	facts := make([]SumFact, len(sums))
	return facts, parallel.Do(ctx, runtime.GOMAXPROCS(0), len(sums), func(_, i int) error {
		sum := sums[i]
		var cells []cell
		for y := row - sum.rows; y <= row+sum.rows; y++ {
			for j := sum.firstElement; j <= sum.lastElement; j++ {
				cells = append(cells, cell{element: j, row: y, area: 1})
			}
		}
		ratio, err := c.errorRatio(ctx, cells, sum.band)
		facts[i] = SumFact{sum.what, ratio}
		return err
	})
}

// errorRatio is error over naive error of a sum over cells: the median of the
// channels in the middle, or that of a band of so many; not a number without good
// channels.
func (c *Cube) errorRatio(ctx context.Context, cells []cell, band int) (float64, error) {
	a, err := c.load(ctx, cells)
	if err != nil {
		return 0, err
	}
	var good []int
	for l, part := range a.plain() {
		if part >= factCoverage {
			good = append(good, l)
		}
	}
	if len(good) < max(band, factVoxels) {
		return math.NaN(), nil
	}
	middle := good[len(good)/2]
	from, to := max(0, middle-factChannels/2), min(c.Grid.Count, middle+factChannels/2)
	weights := make([]float64, c.Grid.Count)
	naive := 0.0
	for l := range c.Grid.Count {
		if l < from || l >= to {
			for i := range cells {
				a.weight[i][l] = 0
			}
		}
		if l >= middle-band/2 && l < middle+band-band/2 {
			_, own := a.sum(l)
			if own != own {
				return own, nil // some channel of the band is not good
			}
			weights[l] = 1
			naive += own
		}
	}
	if band > 0 {
		v, err := c.variancesOf(ctx, a, [][]float64{weights})
		if err != nil {
			return 0, err
		}
		return math.Sqrt(v[0] / naive), nil
	}
	v, err := c.propagate(ctx, a, nil)
	if err != nil {
		return 0, err
	}
	var ratios []float64
	for l := from; l < to; l++ {
		if _, own := a.sum(l); own > 0 {
			ratios = append(ratios, math.Sqrt(v.channels[l][0]/own))
		}
	}
	return median(ratios), nil
}
