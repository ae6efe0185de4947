package physics

import "math"

// DopplerFactor is observed over emitted wavelength for a source that recedes
// at a radial velocity in km/s: sqrt((1+b)/(1-b)), b = v/c, the relativistic
// form that FITS calls VELO (Greisen et al. 2006, A&A 446, 747, table 3). NaN at
// and beyond the speed of light.
func DopplerFactor(velocity_km_s float64) float64 {
	b := velocity_km_s / lightSpeed_km_s
	if !(math.Abs(b) < 1) {
		return math.NaN()
	}
	return math.Sqrt((1 + b) / (1 - b))
}

// RadialVelocity inverts DopplerFactor: the velocity in km/s of a ratio of
// observed over emitted wavelength, c (f^2-1)/(f^2+1). NaN unless f > 0.
func RadialVelocity(factor float64) float64 {
	if !(factor > 0) {
		return math.NaN()
	}
	square := factor * factor
	return lightSpeed_km_s * (square - 1) / (square + 1)
}
