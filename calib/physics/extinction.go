package physics

import "math"

// ExtinctionPoint is a row of a site's extinction curve.
type ExtinctionPoint struct {
	VacuumNm      float64
	MagPerAirmass float64
}

// ExtinctionCurve is what a site's air takes, magnitudes per unit of air mass, by
// ascending vacuum wavelength.
type ExtinctionCurve []ExtinctionPoint

// At is the extinction at a vacuum wavelength, in magnitudes per unit of air mass, linear
// between points. NaN beyond the table's ends: nobody measured it there.
func (c ExtinctionCurve) At(vacuumNm float64) float64 {
	n := len(c)
	if n == 0 || !(vacuumNm >= c[0].VacuumNm && vacuumNm <= c[n-1].VacuumNm) {
		return math.NaN()
	}
	low, high := 0, n-1
	for high-low > 1 {
		if middle := (low + high) / 2; c[middle].VacuumNm <= vacuumNm {
			low = middle
		} else {
			high = middle
		}
	}
	a, b := c[low], c[high]
	if a.VacuumNm == b.VacuumNm { // a table of one point
		return a.MagPerAirmass
	}
	return a.MagPerAirmass + (b.MagPerAirmass-a.MagPerAirmass)*(vacuumNm-a.VacuumNm)/(b.VacuumNm-a.VacuumNm)
}

// AirTransmission is the share of the light that an extinction of k magnitudes per unit
// of air mass lets through at an air mass X: 10^(-0.4 k X) (Bouguer's law).
func AirTransmission(magPerAirmass, airmass float64) float64 {
	return math.Pow(10, -0.4*magPerAirmass*airmass)
}

// RayleighExtinction is what molecules alone scatter away at the zenith, magnitudes, at a
// vacuum wavelength and under an air pressure in Pa: Hansen & Travis 1974 (Space Science
// Reviews 16, 527, equation 2.30), L in micrometres,
//
//	1.0857 0.008569 L^-4 (1 + 0.0113 L^-2 + 0.00013 L^-4) P/101325.
//
// It is the least that any site has: dust, ozone and water come on top. A curve that
// falls below it is in other units, or for other wavelengths.
func RayleighExtinction(vacuumNm, pressurePa float64) float64 {
	if !(vacuumNm > 0) {
		return math.NaN()
	}
	square := 1e6 / (vacuumNm * vacuumNm)
	depth := 0.008569 * square * square * (1 + square*(0.0113+0.00013*square))
	return 2.5 * math.Log10E * depth * pressurePa / 101325
}
