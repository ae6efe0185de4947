package calib

import "math"

// Illumination fills dst[y] with the light that mirror rows bring to detector row y
// of a trace, in units of a slit without ends. centres are where the centres of the
// open mirror rows lie (rows, at x = X_c), pitch is their distance, and each is
// spread by a Gaussian of width fwhm, in rows. It is 1 inside a slit, falls over
// about one fwhm at its ends, and shows what an element of few or closed rows lacks.
func Illumination(dst, centres []float64, pitch, fwhm float64) {
	scale := fwhmPerSigma / (fwhm * math.Sqrt2)
	for y := range dst {
		dst[y] = 0
		for _, c := range centres {
			d := float64(y) - c
			if math.Abs(d) > 3*fwhm+1 {
				continue
			}
			dst[y] += math.Abs(pitch) * (math.Erf((d+0.5)*scale) - math.Erf((d-0.5)*scale)) / 2
		}
	}
}
