package main

import (
	"fmt"
	"strings"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/sequence"
)

// scienceWords say which science steps have no frame, and what became of them; empty where
// all have one.
func scienceWords(r *reduce.Result) string {
	steps, used := 0, 0
	for _, e := range r.Ledger {
		if e.Step > 0 && sequence.Kind(e.Kind) == sequence.Science {
			steps++
			if e.Verdict.Used() {
				used++
			}
		}
	}
	if used == steps {
		return ""
	}
	q := r.Run.Quality
	text := fmt.Sprintf("science: %d of %d steps have a frame", used, steps)
	switch {
	case q.Lost > 0 && q.RestoredGrowth != nil:
		text += fmt.Sprintf("; %d are restored from the dark columns (flag RESTORED), which multiplies the noise by %.2f", q.Lost, *q.RestoredGrowth)
	case q.Lost > 0:
		text += fmt.Sprintf("; %d are lost (flag LOST)", q.Lost)
	default:
		text += "; other cycles show the masks of the rest"
	}
	return text + "\n"
}

// flagWords say why voxels are not good, of those in coded rows on the detector; empty where
// all are.
func flagWords(q product.Quality) string {
	const worth = 5e-5 // shows in two decimals of a percentage
	var parts []string
	for _, f := range q.Flags {
		if f.Bit&product.FlagBad == 0 || f.Share < worth {
			continue
		}
		part := fmt.Sprintf("%.2f %% %s", 100*f.Share, f.Name)
		if f.Bit == product.FlagBadPixel {
			part += fmt.Sprintf(" (%d bad pixels; %d pixels struck by cosmic rays in samples that cannot be told)", q.BadPixels, q.DoubtfulPixels)
		}
		parts = append(parts, part)
	}
	if len(parts) == 0 {
		return ""
	}
	return "not good, of those: " + strings.Join(parts, ", ") + "; README.md explains the flags\n"
}
