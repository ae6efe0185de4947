package calib

import "math"

// Illumination fills dst[y] with the light that mirror rows bring to detector row y
// of a trace, in units of a slit without ends. centres are where the centres of the
// open mirror rows lie (rows, at x = X_c), pitch is their distance, and each is
// spread by a Gaussian of width fwhm, in rows. It is 1 inside a slit, falls over
// about one fwhm at its ends, and shows what an element of few or closed rows lacks.
func Illumination(dst, centres []float64, pitch, fwhm float64) {
	for y := range dst {
		dst[y] = 0
		for _, c := range centres {
			d := float64(y) - c
			if math.Abs(d) > 3*fwhm+1 {
				continue
			}
			dst[y] += math.Abs(pitch) * RowShare(d, fwhm)
		}
	}
}

// RowShare is the part of a mirror row's light that falls on a row of pixels d rows
// from its centre, spread by a Gaussian of width fwhm, in rows.
func RowShare(d, fwhm float64) float64 {
	scale := fwhmPerSigma / (fwhm * math.Sqrt2)
	return (math.Erf((d+0.5)*scale) - math.Erf((d-0.5)*scale)) / 2
}
