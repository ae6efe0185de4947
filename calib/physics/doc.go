// Package physics holds the closed formulas that the rehearsal and the
// reduction share: black bodies, AB magnitudes and photon counts, the index of
// air, airmass, refraction, extinction, the place of a target in the sky, the
// velocity of the observer, Doppler factors, the noise of read modes, diffraction at the
// telescope and at an array of mirrors.
//
// It imports the standard library only and keeps no state. Units are in every
// name: wavelengths are nanometres in vacuum unless the name says air, fluxes
// are per nanometre and square metre, angles are degrees.
//
// Constants are those of the SI of 2019 (exact by definition). Functions
// return NaN outside the domain their comment states; none panics.
package physics

// The defining constants of the SI (BIPM, The International System of Units,
// 9th edition, 2019), exact.
const (
	Planck_J_s       = 6.62607015e-34
	LightSpeed_m_s   = 299792458.0
	Boltzmann_J_K    = 1.380649e-23
	metresPerNm      = 1e-9
	lightSpeed_km_s  = LightSpeed_m_s / 1000
	wattsPerJansky   = 1e-26 // W m-2 Hz-1
	degreesPerRadian = 57.29577951308232
	arcsecPerRadian  = 3600 * degreesPerRadian
)
