package product

import "mirrorloom/calib/physics"

// FrameName is a standard of rest of wavelengths, in the words of FITS.
type FrameName string

// The standards of rest.
const (
	Topocentric  FrameName = "TOPOCENT" // as observed
	Heliocentric FrameName = "HELIOCEN"
	Barycentric  FrameName = "BARYCENT"
)

// SpectralFrame is the standard of rest to which a cube's wavelengths belong. The zero
// value is Topocentric.
type SpectralFrame struct {
	Name FrameName
	// Factor is wavelength in the frame over wavelength observed, as
	// physics.Velocity.Factor; 0 and 1 are as observed.
	Factor float64
}

// ObservedNM is the wavelength at the telescope of a wavelength in the frame.
func (f SpectralFrame) ObservedNM(nm float64) float64 {
	if f.topocentric() {
		return nm
	}
	return nm / f.Factor
}

// FrameNM inverts ObservedNM.
func (f SpectralFrame) FrameNM(observedNM float64) float64 {
	if f.topocentric() {
		return observedNM
	}
	return observedNM * f.Factor
}

// VelocityMS is VELOSYS: the radial velocity, m/s, at which the observer recedes from
// the target with respect to the frame, so that the relativistic Doppler factor of it is
// wavelength observed over wavelength in the frame. About minus the correction that is
// added to radial velocities.
func (f SpectralFrame) VelocityMS() float64 {
	if f.topocentric() {
		return 0
	}
	return 1000 * physics.RadialVelocity(1/f.Factor)
}

func (f SpectralFrame) topocentric() bool {
	return f.Name == "" || f.Name == Topocentric || f.Factor == 0
}

// cards are those of FITS Standard 4.0, section 8.4.1 (table 27). SSYSOBS says in which
// frame a wavelength of the cube does not depend on the place in the field: one factor
// serves the whole cube.
func (f SpectralFrame) cards() []card {
	if f.topocentric() {
		return []card{{"SPECSYS", string(Topocentric), "wavelengths as observed"}}
	}
	return []card{
		{"SPECSYS", string(f.Name), "standard of rest of the wavelengths"},
		{"SSYSOBS", string(Topocentric), "frame of the observation"},
		{"VELOSYS", plus(f.VelocityMS()), "[m/s] observer's recession from the target"},
	}
}
