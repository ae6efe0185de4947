package reduce

import (
	"math"

	"mirrorloom/pipeline/product"
)

// The bins of pulls: quarters of a standard deviation to 6 on both sides.
const (
	pullBins  = 48
	pullStep  = 0.25
	pullFirst = -pullStep * pullBins / 2
)

// darkPulls counts dark decodes over their standard deviations; the outermost bins hold
// what lies beyond.
type darkPulls [pullBins]int32

func (c *darkPulls) add(o darkPulls) {
	for i, n := range o {
		c[i] += n
	}
}

// count takes in the dark decodes of pixel p of a block of n, whose mean has been taken
// off where the pedestal is theirs; sigma is their standard deviation.
func (c *darkPulls) count(w *decodeWorker, columns []int, p, n int, mean, sigma float64) {
	if !(sigma > 0) {
		return
	}
	for _, column := range columns {
		bin := (float64(w.decoded[column*n+p])-mean)/sigma/pullStep + pullBins/2
		if bin == bin {
			c[int(min(max(math.Floor(bin), 0), pullBins-1))]++
		}
	}
}

// summary is run.json's; nil without any.
func (c *darkPulls) summary() *product.DarkPulls {
	d := &product.DarkPulls{FirstSigma: pullFirst, StepSigma: pullStep, Counts: make([]int, pullBins)}
	for i, n := range c {
		d.Counts[i] = int(n)
	}
	if d.Number() == 0 {
		return nil
	}
	return d
}
