package physics

import "math"

// SeeingFWHM is the width of the seeing, arc seconds, at a vacuum wavelength and an air
// mass, for that at a reference wavelength and the zenith: it goes with L^-0.2 and X^0.6
// (Kolmogorov turbulence; Fried 1966, Journal of the Optical Society of America 56, 1372).
func SeeingFWHM(zenithFWHM, referenceNm, vacuumNm, airmass float64) float64 {
	return zenithFWHM * math.Pow(vacuumNm/referenceNm, -0.2) * math.Pow(airmass, 0.6)
}

// StripFraction is the share of a star's light, a Gaussian of the given FWHM, that falls
// into a strip of a width whose middle lies an offset away; all in the same unit:
//
//	(erf((width/2 - offset)/(s sqrt 2)) + erf((width/2 + offset)/(s sqrt 2)))/2, s = FWHM/2.3548.
//
// The rest is the slit loss. A rectangle's share is the product of its two strips'. True
// seeing has wider wings, so that the loss is a lower limit.
func StripFraction(fwhm, width, offset float64) float64 {
	scale := fwhm / (2 * math.Sqrt(2*math.Ln2)) * math.Sqrt2
	return (math.Erf((width/2-offset)/scale) + math.Erf((width/2+offset)/scale)) / 2
}
