package physics

import "math"

// In units of the wavelength times the f-number: computed from the zeros and the
// half-power point (v = 1.616339948) of (2 J1(v)/v)^2, v = pi r/(L N).
const (
	airyFWHM = 1.028993969962193
	airyRing = 1.219669891266504
)

// The image of a point that a circular pupil without obstruction makes at an f-number N,
// as function of the distance r from its middle (Airy 1835, Transactions of the Cambridge
// Philosophical Society 5, 283; Born & Wolf, Principles of Optics, section 8.5):
//
//	intensity over that of the middle = (2 J1(v)/v)^2, v = pi r/(L N).
//
// An obstruction narrows the core and puts more light into the rings. Sizes are
// micrometres; the wavelength is in the medium, which is air or vacuum: no difference here.

// AiryFWHM is the full width at half maximum of the image of a point, um.
func AiryFWHM(nm, fNumber float64) float64 { return airyFWHM * airyUnit(nm, fNumber) }

// AiryRadius is the radius of the first dark ring of the image of a point, um.
func AiryRadius(nm, fNumber float64) float64 { return airyRing * airyUnit(nm, fNumber) }

// AiryIntensity is the intensity at a radius over that of the middle.
func AiryIntensity(radiusUM, nm, fNumber float64) float64 {
	v := math.Pi * math.Abs(radiusUM) / airyUnit(nm, fNumber)
	if v < 1e-4 { // the series 1 - v^2/4, exact to 1e-17
		return 1 - v*v/4
	}
	a := 2 * math.J1(v) / v
	return a * a
}

// AiryEncircled is the share of the light within a radius, 1 - J0(v)^2 - J1(v)^2
// (Rayleigh 1881, Philosophical Magazine 11, 214).
func AiryEncircled(radiusUM, nm, fNumber float64) float64 {
	v := math.Pi * math.Abs(radiusUM) / airyUnit(nm, fNumber)
	j0, j1 := math.J0(v), math.J1(v)
	return 1 - j0*j0 - j1*j1
}

// AiryStrip is the share of the light within a long strip of a width, um, about the
// middle: an element on which a point's image is centred. By the transfer function of
// the pupil, T(s) = 2/pi (acos s - s sqrt(1-s^2)) with s in units of its end 1/(L N),
//
//	share = 2 b int_0^1 T(s) sinc(b s) ds, b = width/(L N), sinc(x) = sin(pi x)/(pi x).
//
// Simpson's rule in t, s = sin t, at 32 points a period of the sine: exact to 1e-7. Strips
// wider than 1000 L N get the asymptote 1 - 8/(pi^3 b).
func AiryStrip(widthUM, nm, fNumber float64) float64 {
	b := math.Abs(widthUM) / airyUnit(nm, fNumber)
	if math.IsNaN(b) {
		return math.NaN()
	}
	if b > 1000 {
		return 1 - 8/(math.Pi*math.Pi*math.Pi*b)
	}
	return 2 * b * simpson(0, math.Pi/2, 64+32*int(b), func(t float64) float64 {
		s, c := math.Sincos(t)
		return 2 / math.Pi * (math.Pi/2 - t - s*c) * sinc(b*s) * c
	})
}

// airyUnit is L N in um; NaN unless both are positive.
func airyUnit(nm, fNumber float64) float64 {
	if !(nm > 0 && fNumber > 0) {
		return math.NaN()
	}
	return nm / 1000 * fNumber
}

// sinc is sin(pi x)/(pi x).
func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	x *= math.Pi
	return math.Sin(x) / x
}

// simpson integrates f from a to b by Simpson's rule on 2n intervals.
func simpson(a, b float64, n int, f func(float64) float64) float64 {
	h := (b - a) / float64(2*n)
	sum := f(a) + f(b)
	for i := 1; i < 2*n; i++ {
		sum += float64(2+2*(i%2)) * f(a+h*float64(i))
	}
	return sum * h / 3
}
