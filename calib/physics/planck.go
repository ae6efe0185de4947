package physics

import "math"

// PlanckEnergy is the spectral radiance of a black body per wavelength,
//
//	B = 2 h c^2 / L^5 / (exp(h c / (L k T)) - 1),
//
// in W m-2 sr-1 nm-1, for L in vacuum nanometres and T in kelvin (Planck 1901,
// Ann. Phys. 309, 553). NaN unless both are positive; 0 where the exponential
// overflows.
func PlanckEnergy(vacuumNm, temperatureK float64) float64 {
	return PlanckPhotons(vacuumNm, temperatureK) * PhotonEnergy(vacuumNm)
}

// PlanckPhotons is the photon radiance of a black body per wavelength,
// 2 c / L^4 / (exp(h c / (L k T)) - 1), in photons s-1 m-2 sr-1 nm-1. Domain as
// PlanckEnergy.
func PlanckPhotons(vacuumNm, temperatureK float64) float64 {
	if !(vacuumNm > 0) || !(temperatureK > 0) {
		return math.NaN()
	}
	metres := vacuumNm * metresPerNm
	x := Planck_J_s * LightSpeed_m_s / (metres * Boltzmann_J_K * temperatureK)
	square := metres * metres
	return 2 * LightSpeed_m_s / (square * square) / math.Expm1(x) * metresPerNm
}

// PhotonEnergy is h c / L in joules, for L in vacuum nanometres.
func PhotonEnergy(vacuumNm float64) float64 {
	return Planck_J_s * LightSpeed_m_s / (vacuumNm * metresPerNm)
}

// LinePhotons turns the flux of a line, in W m-2, into photons s-1 m-2, the
// line being narrow: all its photons carry the energy of vacuumNm.
func LinePhotons(flux_W_m2, vacuumNm float64) float64 {
	return flux_W_m2 / PhotonEnergy(vacuumNm)
}
