package rehearse

import (
	"math"
	"math/rand/v2"
)

// transformedFrom is the mean from which the transformed rejection is used; it
// is valid from 10 upwards.
const transformedFrom = 10

// poisson draws a whole number from the Poisson distribution of a mean >= 0:
// exactly, but for the rounding of float64. Means below 10 by the inversion of
// one uniform number, others by the transformed rejection PTRS (Hormann 1993,
// Insurance: Mathematics and Economics 12, 39), whose squeeze spares nine of ten
// samples the logarithms.
func poisson(pcg *rand.PCG, mean float64) float64 {
	if mean >= transformedFrom {
		return poissonTransformed(pcg, mean)
	}
	if !(mean > 0) {
		return 0
	}
	u := uniform(pcg)
	p := math.Exp(-mean)
	k := 0.0
	for u > p && k < 200 { // beyond 200 lies less than 1e-200 of a mean of 10
		u -= p
		k++
		p *= mean / k
	}
	return k
}

func poissonTransformed(pcg *rand.PCG, mean float64) float64 {
	b := 0.931 + 2.53*math.Sqrt(mean)
	a := -0.059 + 0.02483*b
	vr := 0.9277 - 3.6224/(b-2)
	for {
		u := uniform(pcg) - 0.5
		v := uniform(pcg)
		us := 0.5 - math.Abs(u)
		k := math.Floor((2*a/us+b)*u + mean + 0.43)
		if us >= 0.07 && v <= vr {
			return k
		}
		if k < 0 || (us < 0.013 && v > us) {
			continue
		}
		inverseAlpha := 1.1239 + 1.1328/(b-3.4)
		if math.Log(v*inverseAlpha/(a/(us*us)+b)) <= k*math.Log(mean)-mean-logFactorial(k) {
			return k
		}
	}
}

// logFactorial is ln k! for whole k >= 0: from a table below 16, above by
// Stirling's series (Abramowitz & Stegun 6.1.41), there good to 1e-13.
func logFactorial(k float64) float64 {
	if k < float64(len(logFactorials)) {
		return logFactorials[int(k)]
	}
	const halfLog2Pi = 0.91893853320467274178
	x := k + 1
	s := 1 / (x * x)
	return (x-0.5)*math.Log(x) - x + halfLog2Pi + (1.0/12-s*(1.0/360-s*(1.0/1260-s/1680)))/x
}

var logFactorials = func() (table [16]float64) {
	for k := 2; k < len(table); k++ {
		table[k] = table[k-1] + math.Log(float64(k))
	}
	return table
}()
