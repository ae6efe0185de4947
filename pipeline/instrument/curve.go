package instrument

import "sort"

// FractionPoint is a row of a throughput table.
type FractionPoint struct {
	// WavelengthNM is in vacuum nm.
	WavelengthNM float64 `yaml:"wavelength_nm"`
	// Fraction is the transmission, 0 to 1.
	Fraction float64 `yaml:"fraction"`
}

// Curve is a throughput table, wavelengths strictly ascending.
type Curve []FractionPoint

// At interpolates linearly at a vacuum wavelength in nm. Beyond the ends of
// the table it is 0: a throughput is written to where the light ends, and light
// that nobody measured is not invented.
func (c Curve) At(wavelengthNM float64) float64 {
	n := len(c)
	if n == 0 || !(wavelengthNM >= c[0].WavelengthNM && wavelengthNM <= c[n-1].WavelengthNM) {
		return 0
	}
	return interpolate(n, wavelengthNM, func(i int) (x, y float64) { return c[i].WavelengthNM, c[i].Fraction })
}

// RatioPoint is a row of the contrast table.
type RatioPoint struct {
	// WavelengthNM is in vacuum nm.
	WavelengthNM float64 `yaml:"wavelength_nm"`
	// Ratio is the light of an on mirror over that of an off mirror, above 1.
	Ratio float64 `yaml:"ratio"`
}

// Contrast is the contrast table, wavelengths strictly ascending.
type Contrast []RatioPoint

// At interpolates linearly at a vacuum wavelength in nm. Beyond the ends of
// the table it keeps the end's value: mirrors leak at every wavelength.
// It is 0 for an empty table, which no checked profile has.
func (c Contrast) At(wavelengthNM float64) float64 {
	if len(c) == 0 {
		return 0
	}
	return interpolate(len(c), wavelengthNM, func(i int) (x, y float64) { return c[i].WavelengthNM, c[i].Ratio })
}

// interpolate is linear between n points of ascending x and constant beyond.
func interpolate(n int, x float64, point func(i int) (x, y float64)) float64 {
	after := sort.Search(n, func(i int) bool { px, _ := point(i); return px > x })
	if after == 0 {
		_, y := point(0)
		return y
	}
	x0, y0 := point(after - 1)
	if after == n {
		return y0
	}
	x1, y1 := point(after)
	return y0 + (y1-y0)*((x-x0)/(x1-x0))
}
