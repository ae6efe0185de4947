package trade

import (
	"math"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/sequence"
)

// Field is a way to cut the field into elements.
type Field struct {
	// Elements is their number, Mirrors their width in u.
	Elements, Mirrors int
}

// lostPerDark is how many dark columns a lost frame asks for: random sets of g/4 rows are
// restored with noise 1.14 times as large, larger ones may be singular.
const lostPerDark = 4

// strickenPart of pixels may be struck more often than can be restored: the part of voxels
// lost by it is below that of common bad pixels.
const strickenPart = 1e-3

// LeastDark is the least number of dark columns of a code of v columns under limits (see
// the package's documentation).
func LeastDark(v int, limits sequence.Limits) int {
	g := int(math.Ceil(2 * math.Log2(float64(v))))
	g = max(g, lostPerDark*limits.LostFrames)
	hits := float64(v) * limits.CosmicPer1000 / 1000
	for aboveOften(hits, g/lostPerDark) > strickenPart && g < v {
		g++
	}
	return g
}

// aboveOften is the chance of more than most events where mean are expected (Poisson).
func aboveOften(mean float64, most int) float64 {
	if mean == 0 {
		return 0
	}
	sum := 0.0
	for i := range most + 1 {
		logFactorial, _ := math.Lgamma(float64(i) + 1)
		sum += math.Exp(float64(i)*math.Log(mean) - mean - logFactorial)
	}
	return max(0, 1-sum)
}

// codes lists the codes of a field, without dwell and cycles, the slit scan first. v is the
// only size allowed, 0 for any; dark the number of dark columns asked for, nil for what the
// limits and the default ask for.
func codes(f Field, v int, dark *int, limits sequence.Limits) []forecast.Candidate {
	list := []forecast.Candidate{{
		Family: string(hadamard.SlitScan), V: f.Elements, K: 1, N: f.Elements, ElementMirrors: f.Mirrors,
	}}
	for _, family := range hadamard.Families() {
		if family == hadamard.SlitScan {
			continue
		}
		last := 0
		for _, enough := range darkRules(dark, limits) {
			size := smallest(family, f.Elements, v, enough)
			if size == 0 || size == last {
				continue
			}
			last = size
			design := designOf(family, size)
			list = append(list, forecast.Candidate{
				Family: string(family), V: design.V, K: design.K, L: design.L,
				N: f.Elements, ElementMirrors: f.Mirrors, Dark: design.V - f.Elements,
			})
		}
	}
	return list
}

// darkRules are what may be asked of the dark columns of a code of v columns.
func darkRules(dark *int, limits sequence.Limits) []func(v int) int {
	if dark != nil {
		return []func(int) int{func(int) int { return *dark }}
	}
	least := func(v int) int { return LeastDark(v, limits) }
	return []func(int) int{least, func(v int) int { return max(least(v), hadamard.DefaultDark(v)) }}
}

// smallest is the family's smallest size, or v itself, that holds n elements and the dark
// columns asked for; 0 for none.
func smallest(family hadamard.Family, n, v int, dark func(v int) int) int {
	for _, size := range hadamard.Sizes(family) {
		if (v == 0 || size == v) && size-n >= dark(size) {
			return size
		}
	}
	return 0
}

// designOf is a family's code of a size it has.
func designOf(family hadamard.Family, v int) hadamard.Design {
	code, err := hadamard.New(family, v)
	if err != nil {
		return hadamard.Design{} // not of its Sizes
	}
	return code.Design()
}
