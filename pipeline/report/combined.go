package report

import (
	"fmt"
	"strings"

	"mirrorloom/pipeline/product"
)

// combinedSentences say of a combined cube what the sentences of a reduction say of a
// night.
func combinedSentences(in Input) []string {
	all := []string{
		fmt.Sprintf("The cube is the mean of %d runs, weighted by 1/VARIANCE: %s.", len(in.Run.Combined), combinedList(in.Run.Combined)),
		framesSentence(in.Ledger),
		fmt.Sprintf("Of all voxels %s are good in at least one run.", percent(in.Run.Quality.GoodFraction)),
	}
	if chi2 := in.Run.Quality.DarkChi2Heldout; chi2 != nil {
		all = append(all, fmt.Sprintf("In the mean of the runs, the dark columns have a chi-square of %.3f where 1 is due.", *chi2))
	} else {
		all = append(all, "The errors of one run at least were not checked by dark columns.")
	}
	return append(all, "Wavelengths, throughput and calibration are those of the runs: see their reports.")
}

func combinedList(runs product.Members) string {
	var parts []string
	for _, r := range runs {
		text := fmt.Sprintf("%s (%d frames, at element %d, row %d", r.Path, r.Frames, r.Element, r.Row)
		if r.LightErr > 0 {
			text += fmt.Sprintf(", %.3f ± %.3f times the light of the first", r.Light, r.LightErr)
		}
		parts = append(parts, text+")")
	}
	return strings.Join(parts, "; ")
}
