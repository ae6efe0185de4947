package calib

// Linearise replaces measured values m, in ADU above the bias level, by the charge
// they stand for, in place: m (1 + c1 m + c2 m^2 + ...). No coefficients: nothing
// changes. Photon noise comes out as that of the true charge; read noise, which is
// added behind the curve, is stretched by its slope, but only where photon noise rules.
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
