package physics

import "math"

// AirIndex is the phase index of refraction of standard air: 15 degrees C,
// 101325 Pa, dry, 450 ppm CO2 (Ciddor 1996, Appl. Opt. 35, 1566, equation 1),
//
//	(n-1) 1e8 = 5792105/(238.0185 - s^2) + 167917/(57.362 - s^2),
//
// s = 1000/L the wave number in vacuum per micrometre. The paper gives it for
// 300 to 1690 nm; longer waves are a smooth continuation. NaN below 180 nm,
// where the pole of the formula is near.
func AirIndex(vacuumNm float64) float64 {
	return 1 + standardRefractivity(vacuumNm)
}

// DryAirIndex is the index of dry air with 450 ppm CO2 at a temperature in
// degrees C and a pressure in Pa: the standard refractivity times the ratio of
// the densities, p/(Z T), with the compressibility Z of Ciddor 1996, equation
// 12 and appendix A, without its terms of water vapour. Domain as AirIndex;
// -40 to 100 C, 80 to 120 kPa in the paper.
func DryAirIndex(vacuumNm, temperatureC, pressurePa float64) float64 {
	ratio := density(temperatureC, pressurePa) / density(15, 101325)
	return 1 + standardRefractivity(vacuumNm)*ratio
}

// VacuumToAir is the wavelength in standard air of a vacuum wavelength, both in
// nm: L/n(L). Domain as AirIndex.
func VacuumToAir(vacuumNm float64) float64 {
	return vacuumNm / AirIndex(vacuumNm)
}

// AirToVacuum inverts VacuumToAir by iterating L = air n(L); each pass gains
// more than four digits, so that six reach the last bit. Domain as AirIndex.
func AirToVacuum(airNm float64) float64 {
	vacuum := airNm
	for range 6 {
		vacuum = airNm * AirIndex(vacuum)
	}
	return vacuum
}

func standardRefractivity(vacuumNm float64) float64 {
	if !(vacuumNm >= 180) {
		return math.NaN()
	}
	s := 1000 / vacuumNm
	return 1e-8 * (5792105/(238.0185-s*s) + 167917/(57.362-s*s))
}

// density is p/(Z T), the density of dry air but for a constant factor.
func density(temperatureC, pressurePa float64) float64 {
	const (
		a0 = 1.58123e-6 // K/Pa
		a1 = -2.9331e-8 // 1/Pa
		a2 = 1.1043e-10 // 1/(K Pa)
		d  = 1.83e-11   // K^2/Pa^2
		t0 = 273.15
	)
	q := pressurePa / (temperatureC + t0)
	z := 1 - q*(a0+temperatureC*(a1+temperatureC*a2)) + q*q*d
	return q / z
}
