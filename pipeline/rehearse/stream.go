package rehearse

import "math/rand/v2"

// newStream returns the random numbers of one purpose ("photons", "read", ...)
// in one step and row. Streams of different keys are independent for all that a
// rehearsal can see, so that rows and steps may be made in any order.
//
// The key goes through FNV-1a (Fowler, Noll & Vo, RFC 9923) and the finisher of
// SplitMix64 (Steele, Lea & Flood 2014, OOPSLA) into the two words that seed a
// PCG-DXSM (math/rand/v2).
func newStream(seed uint64, purpose string, step, row int) *rand.PCG {
	pcg := new(rand.PCG)
	reseed(pcg, seed, purpose, step, row)
	return pcg
}

// reseed is newStream without a new generator.
func reseed(pcg *rand.PCG, seed uint64, purpose string, step, row int) {
	const (
		offset = 14695981039346656037
		prime  = 1099511628211
	)
	h := uint64(offset)
	for i := range len(purpose) {
		h = (h ^ uint64(purpose[i])) * prime
	}
	a := splitMix(seed ^ splitMix(h))
	a = splitMix(a ^ splitMix(uint64(step)+0x51ED270B))
	a = splitMix(a ^ splitMix(uint64(row)+0x2545F491))
	pcg.Seed(a, splitMix(a^h))
}

// splitMix is one output of SplitMix64 from the state z.
func splitMix(z uint64) uint64 {
	z += 0x9E3779B97F4A7C15
	z = (z ^ z>>30) * 0xBF58476D1CE4E5B9
	z = (z ^ z>>27) * 0x94D049BB133111EB
	return z ^ z>>31
}

// uniform is a number in (0, 1), never an end, of 53 bits.
func uniform(pcg *rand.PCG) float64 {
	return (float64(pcg.Uint64()>>11) + 0.5) * (1.0 / (1 << 53))
}

// within is a uniform number between -size and size.
func within(pcg *rand.PCG, size float64) float64 { return (2*uniform(pcg) - 1) * size }
