package reduce

import "math"

// stepChi2 compares, by code row, its part in the dark residuals with what noise gives:
// which of the frames is bad. Blocks are added in their order, so that the sums do not
// depend on how rows were grouped.
type stepChi2 struct {
	square []float64
	noise  float64
}

func newStepChi2(slots int) stepChi2 { return stepChi2{square: make([]float64, slots)} }

func (c *stepChi2) add(b blockQuality) {
	for i, z := range b.steps {
		c.square[i] += z
	}
	c.noise += b.noise
}

// ratios is the chi-square of each code row over its expectation: 1 if all is well, NaN
// where the dark columns do not see the row. share is P_kk, and noise the rows' relative
// variances.
func (c *stepChi2) ratios(share, noise []float64, mean float64) []float64 {
	out := make([]float64, len(c.square))
	for k, z := range c.square {
		out[k] = math.NaN()
		if expected := share[k] * noise[k] / mean * c.noise; expected > 0 {
			out[k] = z / expected
		}
	}
	return out
}
