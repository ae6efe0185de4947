package report

import (
	"context"
	"errors"
	"fmt"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/extract"
)

// sumView is a row of the table of sums: by how much the errors of independent
// voxels would be off, at each place.
type sumView struct {
	What   string
	Ratios []string
}

// addSums tells what adding voxels up does to errors, at the brightest place and at
// one of blank sky: the first and the last of places. A cube that does not carry what
// it takes, of an older version, or has another grid, gets no such section.
func (p *page) addSums(ctx context.Context, cubePath string, places []place) error {
	if len(places) == 0 {
		return nil
	}
	c, err := extract.Open(cubePath)
	if errors.Is(err, fitsutil.ErrMissingHDU) || errors.Is(err, fitsutil.ErrMissingCard) || errors.Is(err, extract.ErrGrid) {
		return nil
	}
	if err != nil {
		return err
	}
	defer c.Close() // only read from
	chosen := []place{places[0]}
	if len(places) > 1 {
		chosen = append(chosen, places[len(places)-1])
	}
	least, most := math.Inf(1), math.Inf(-1)
	for _, at := range chosen {
		facts, err := c.SumFacts(ctx, at.element, at.row)
		if err != nil {
			return err
		}
		if facts == nil {
			continue
		}
		p.SumPlaces = append(p.SumPlaces, at.label)
		for i, f := range facts {
			if i == len(p.Sums) {
				p.Sums = append(p.Sums, sumView{What: f.What})
			}
			if math.IsNaN(f.Ratio) {
				p.Sums[i].Ratios = append(p.Sums[i].Ratios, "too few good voxels")
				continue
			}
			p.Sums[i].Ratios = append(p.Sums[i].Ratios, fmt.Sprintf("%+.1f %%", math.Round(1000*(f.Ratio-1))/10+0))
			least, most = min(least, f.Ratio), max(most, f.Ratio)
		}
	}
	if most >= least {
		p.SumsNote = sumsNote(least, most)
	}
	return nil
}

// sumsNote says it in words.
func sumsNote(least, most float64) string {
	text := "Voxels share pixels, and decoding couples the elements of a pixel. The root of the sum of VARIANCE, which takes voxels for independent, is therefore not the error of a sum over voxels. "
	const slight = 0.005 // what the table would round to 0 or nearly
	switch {
	case most <= 1+slight && least >= 1-slight:
		text += "In the sums below it happens to be right."
	case least >= 1-slight:
		text += fmt.Sprintf("In the sums below it is too small, by up to %.0f %% of itself.", 100*(most-1))
	case most <= 1+slight:
		text += fmt.Sprintf("In the sums below it is too large, by up to %.0f %% of itself.", 100*(1-least))
	default:
		text += fmt.Sprintf("In the sums below it is too small by up to %.0f %% of itself, or too large by up to %.0f %%.", 100*(most-1), 100*(1-least))
	}
	return text + " The table says by how much the error is above it (+) or below (−). The command extract gives sums with their own errors."
}
