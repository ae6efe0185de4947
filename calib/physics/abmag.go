package physics

import "math"

// ABZero_Jy is the flux density of AB magnitude 0. Oke & Gunn 1983 (ApJ 266,
// 713) define m = -2.5 log10(f / (erg s-1 cm-2 Hz-1)) - 48.60, which is
// 3630.78 Jy; the rounded 3631 Jy, in common use, is what mirrorloom means by AB.
// The two differ by 6.0e-5.
const ABZero_Jy = 3631.0

// ABPhotons is the photon flux density of a source of AB magnitude mag at L, in
// photons s-1 m-2 nm-1: f/(h L), f = ABZero_Jy 10^(-0.4 mag).
func ABPhotons(mag, vacuumNm float64) float64 {
	return abFlux_W_m2_Hz(mag) / (Planck_J_s * vacuumNm)
}

// ABEnergy is the energy flux density of a source of AB magnitude mag at L, in
// W m-2 nm-1: f c/L^2.
func ABEnergy(mag, vacuumNm float64) float64 {
	metres := vacuumNm * metresPerNm
	return abFlux_W_m2_Hz(mag) * LightSpeed_m_s / (metres * metres) * metresPerNm
}

// AttowattsPerWatt turns W m-2 nm-1 into the unit of calibrated cubes, aW m-2 nm-1:
// AB 20 at 500 nm is 0.4354 of them.
const AttowattsPerWatt = 1e18

// ABFlux is ABEnergy in aW m-2 nm-1, the unit of a calibrated cube.
func ABFlux(mag, vacuumNm float64) float64 { return ABEnergy(mag, vacuumNm) * AttowattsPerWatt }

// ABFromFlux inverts ABFlux. It is +Inf at flux 0 and NaN below.
func ABFromFlux(flux_aW_m2_nm, vacuumNm float64) float64 {
	return ABFromEnergy(flux_aW_m2_nm/AttowattsPerWatt, vacuumNm)
}

// PhotonsFromFlux turns a flux density in aW m-2 nm-1 into photons s-1 m-2 nm-1.
func PhotonsFromFlux(flux_aW_m2_nm, vacuumNm float64) float64 {
	return flux_aW_m2_nm / AttowattsPerWatt / PhotonEnergy(vacuumNm)
}

// FluxFromPhotons inverts PhotonsFromFlux.
func FluxFromPhotons(photons_s_m2_nm, vacuumNm float64) float64 {
	return photons_s_m2_nm * PhotonEnergy(vacuumNm) * AttowattsPerWatt
}

// ABFromPhotons inverts ABPhotons. It is +Inf at flux 0 and NaN below.
func ABFromPhotons(photons_s_m2_nm, vacuumNm float64) float64 {
	return abMagnitude(photons_s_m2_nm * Planck_J_s * vacuumNm)
}

// ABFromEnergy inverts ABEnergy. It is +Inf at flux 0 and NaN below.
func ABFromEnergy(flux_W_m2_nm, vacuumNm float64) float64 {
	metres := vacuumNm * metresPerNm
	return abMagnitude(flux_W_m2_nm / metresPerNm * metres * metres / LightSpeed_m_s)
}

func abFlux_W_m2_Hz(mag float64) float64 {
	return ABZero_Jy * wattsPerJansky * math.Pow(10, -0.4*mag)
}

func abMagnitude(flux_W_m2_Hz float64) float64 {
	return -2.5 * math.Log10(flux_W_m2_Hz/(ABZero_Jy*wattsPerJansky))
}
