package product

import "math"

// DarkPulls counts the decodes of dark columns over their standard deviations, before
// VARIANCE is multiplied by any error scale, in a sample of the good pixels: standard
// Gaussian if all is well. Counts[i] is of pulls from FirstSigma + i StepSigma on; the
// outermost bins hold what lies beyond them too.
type DarkPulls struct {
	FirstSigma float64 `json:"first_sigma"`
	StepSigma  float64 `json:"step_sigma"`
	Counts     []int   `json:"counts"`
}

// Number is how many pulls there are.
func (d *DarkPulls) Number() int {
	n := 0
	for _, c := range d.Counts {
		n += c
	}
	return n
}

// Expected is what noise alone gives in bin i.
func (d *DarkPulls) Expected(i int) float64 {
	// The distribution function of the standard Gaussian.
	below := func(x float64) float64 { return 0.5 * math.Erfc(-x/math.Sqrt2) }
	low, high := d.FirstSigma+float64(i)*d.StepSigma, d.FirstSigma+float64(i+1)*d.StepSigma
	from, to := below(low), below(high)
	if i == 0 {
		from = 0
	}
	if i == len(d.Counts)-1 {
		to = 1
	}
	return float64(d.Number()) * (to - from)
}

// Beyond is the part of the pulls beyond so many standard deviations on both sides, a bin's
// edge, and what noise alone gives.
func (d *DarkPulls) Beyond(sigmas float64) (part, expected float64) {
	n := 0
	for i, c := range d.Counts {
		middle := d.FirstSigma + (float64(i)+0.5)*d.StepSigma
		if math.Abs(middle) > sigmas {
			n += c
		}
	}
	return float64(n) / float64(max(1, d.Number())), math.Erfc(sigmas / math.Sqrt2)
}
