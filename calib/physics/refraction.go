package physics

import "math"

// Atmosphere is the air at a site, as refraction sees it.
type Atmosphere struct {
	PressurePa   float64
	TemperatureC float64
	VapourPa     float64 // partial pressure of water
}

// SiteAtmosphere is the mean air at a height above sea level in metres: the U.S.
// Standard Atmosphere 1976 (15 C and 101325 Pa at sea level, 6.5 K/km; it holds to
// 11 km), and the water of Recommendation ITU-R P.835-6, annex 1, 1.2: 7.5 g m-3 at
// sea level, less by e every 2 km. A measured pressure, temperature or humidity is
// better: 10 K, or 30 hPa, are 3 % of the refraction. NaN beyond -1 to 11 km.
func SiteAtmosphere(heightM float64) Atmosphere {
	if !(heightM >= -1000 && heightM <= 11000) {
		return Atmosphere{math.NaN(), math.NaN(), math.NaN()}
	}
	kelvin := 288.15 - 0.0065*heightM
	gramsPerM3 := 7.5 * math.Exp(-heightM/2000)
	return Atmosphere{
		PressurePa:   101325 * math.Pow(kelvin/288.15, 5.25588),
		TemperatureC: kelvin - 273.15,
		VapourPa:     100 * gramsPerM3 * kelvin / 216.7,
	}
}

// Refractivity is n-1 of the air at a vacuum wavelength, by equations 1 to 3 of
// Filippenko 1982 (PASP 94, 715; after Edlen 1953 and Barrell 1951): L in micrometres,
// P and f (water) in mmHg, T in C,
//
//	(n-1) 1e6 = (64.328 + 29498.1/(146 - L^-2) + 255.4/(41 - L^-2)) P (1 + (1.049 - 0.0157 T) 1e-6 P) / (720.883 (1 + 0.003661 T))
//	            - (0.0624 - 0.000680 L^-2) f / (1 + 0.003661 T).
//
// NaN below 200 nm.
func (a Atmosphere) Refractivity(vacuumNm float64) float64 {
	if !(vacuumNm >= 200) {
		return math.NaN()
	}
	const pascalPerMmHg = 133.322387415
	s := 1000 / vacuumNm
	square, p, f, t := s*s, a.PressurePa/pascalPerMmHg, a.VapourPa/pascalPerMmHg, a.TemperatureC
	warm := 1 + 0.003661*t
	dry := (64.328 + 29498.1/(146-square) + 255.4/(41-square)) * p * (1 + (1.049-0.0157*t)*1e-6*p) / (720.883 * warm)
	return 1e-6 * (dry - (0.0624-0.000680*square)*f/warm)
}

// DifferentialRefraction is how far, in arc seconds, the image of a vacuum wavelength
// stands above (nearer the zenith than) that of a reference wavelength, at an apparent
// zenith distance z in degrees: 206265 (n(L) - n(L0)) tan z (Filippenko 1982, equation
// 4), air in plane layers. The earth's roundness takes 0.5 % of it at z = 60 and 1.5 %
// at 75 degrees. NaN outside 0 <= z < 90.
func (a Atmosphere) DifferentialRefraction(vacuumNm, referenceNm, apparentZenithDeg float64) float64 {
	if !(apparentZenithDeg >= 0 && apparentZenithDeg < 90) {
		return math.NaN()
	}
	tan := math.Tan(apparentZenithDeg / degreesPerRadian)
	return arcsecPerRadian * (a.Refractivity(vacuumNm) - a.Refractivity(referenceNm)) * tan
}

// AirmassZenithDistance inverts Airmass: the apparent zenith distance, in degrees, of
// an air mass. 0 for those of 0.999 to Airmass(0), a rounded 1 among them; NaN below
// and above the horizon's 37.92.
func AirmassZenithDistance(airmass float64) float64 {
	const rounded = 0.999
	if !(airmass >= rounded) || airmass > Airmass(90) {
		return math.NaN()
	}
	low, high := 0.0, 90.0
	for range 60 { // halves to the last bit
		if middle := (low + high) / 2; Airmass(middle) < airmass {
			low = middle
		} else {
			high = middle
		}
	}
	if high < 1e-9 {
		return 0
	}
	return high
}
