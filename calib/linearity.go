package calib

// Linearise replaces measured values m, in ADU above the bias level, by the charge
// they stand for, in place: m (1 + c1 m + c2 m^2 + ...). No coefficients: nothing
// changes.
func Linearise(values []float32, coef []float64) {
	if len(coef) == 0 {
		return
	}
	for i, v := range values {
		m, sum := float64(v), 0.0
		for k := len(coef) - 1; k >= 0; k-- {
			sum = (sum + coef[k]) * m
		}
		values[i] = float32(m * (1 + sum))
	}
}

// LinearityVariance is the factor by which Linearise multiplies the variance of a
// value m: the square of its derivative.
func LinearityVariance(m float64, coef []float64) float64 {
	slope, power := 1.0, 1.0
	for k, c := range coef {
		power *= m
		slope += float64(k+2) * c * power
	}
	return slope * slope
}
