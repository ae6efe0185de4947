package hadamard

import "slices"

// What a night is taken to do until it is measured: each frame differs by NightScatter
// (rms, relative), and the whole night's trend spans NightTrend from end to end, as the
// airmass of a long visit and thin clouds make it (common practice, no source).
const (
	NightScatter = 0.05
	NightTrend   = 0.30
)

// TypicalNight is a scatter and a span of a trend that a night may have.
type TypicalNight struct{ Scatter, Trend float64 }

// TypicalNights lists some, the widest first.
func TypicalNights() []TypicalNight {
	var list []TypicalNight
	for _, scatter := range []float64{NightScatter, 0.02, 0.008, 0.003} {
		for _, trend := range []float64{NightTrend, 0.05} {
			list = append(list, TypicalNight{scatter, trend})
		}
	}
	return list
}

// decisive is by how much the logarithm of one's likelihood must exceed a wider one's, odds of
// 150: a scene that tells nothing leaves the widest.
const decisive = 5

// WidestLikely is the first of TypicalNights that is about as likely as any, by the logarithms
// of their likelihoods (Checks.Evidence, summed over cycles). One that is too wide would
// answer with noise where the scene tells little.
func WidestLikely(evidence []float64) int {
	most := slices.Max(evidence)
	return slices.IndexFunc(evidence, func(x float64) bool { return x >= most-decisive })
}
