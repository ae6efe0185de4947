package extract

import (
	"errors"

	"gonum.org/v1/gonum/mat"
)

const (
	// profileDegree of the polynomial over wavelength that each cell's share of the
	// light follows: seeing and refraction change slowly.
	profileDegree = 2
	// smoothChannels are averaged where the spectrum or its variance decides about
	// weights. A profile from the noisy data themselves would follow their noise:
	// E[F D] holds the covariance of F with D, which the average divides.
	smoothChannels = 25
	// leastSquareSN is the mean squared S/N of the smoothed spectrum below which the
	// profile would be that of the noise.
	leastSquareSN = 9
)

// errFaint says that an aperture holds too little light to measure its profile.
var errFaint = errors.New("the light is too faint, or the background too near to it, to measure the profile of optimal weights; use the plain sum")

// optimal replaces the plain weights by those of least variance (Horne 1986, PASP
// 98, 609, equation 8, in two dimensions):
//
//	w = (P/V) / sum(P^2/V),
//
// with P the share of the light that a cell holds, a polynomial over wavelength
// fitted to the cells' light as equation 14 does, negative shares set to 0, and
// sum(area P) = 1 over the aperture, so that the result estimates the plain sum.
// P and V come from smoothed data. The weights of the background follow.
func (a *aperture) optimal() error {
	channels := len(a.weight[0])
	flux, noise, level := make([]float64, channels), make([]float64, channels), make([]float64, channels)
	for l := range channels {
		flux[l], noise[l] = a.sum(l)
		level[l] = a.backgroundAt(l)
		if flux[l] != flux[l] { // not a number
			flux[l], noise[l] = 0, 0
		}
	}
	flux = smooth(flux)
	if !(meanSquareSN(flux, noise) > leastSquareSN) {
		return errFaint
	}
	profile := a.profile(flux, level)
	variance := make([][]float64, len(a.cells))
	for i := range variance {
		variance[i] = make([]float64, channels)
		for l, v := range a.variance[i] {
			if a.good(i, l) {
				variance[i][l] = float64(v)
			}
		}
		variance[i] = smooth(variance[i])
	}
	for l := range channels {
		a.setOptimal(l, profile, variance)
	}
	return nil
}

// backgroundAt is the mean of the good background.
func (a *aperture) backgroundAt(l int) float64 {
	sum, area := 0.0, 0.0
	for i, k := range a.cells {
		if k.background > 0 && a.good(i, l) {
			sum += k.background * float64(a.signal[i][l])
			area += k.background
		}
	}
	if area == 0 {
		return 0
	}
	return sum / area
}

// smooth averages over smoothChannels, fewer at the ends.
func smooth(x []float64) []float64 {
	out := make([]float64, len(x))
	for l := range x {
		first, last := max(0, l-smoothChannels/2), min(len(x)-1, l+smoothChannels/2)
		out[l] = total(x[first:last+1]) / float64(last-first+1)
	}
	return out
}

func meanSquareSN(flux, variance []float64) float64 {
	sum, n := 0.0, 0
	for l, v := range variance {
		if v > 0 {
			sum += flux[l] * flux[l] * smoothChannels / v
			n++
		}
	}
	return sum / float64(max(n, 1))
}

// profile fits each cell's share of the light, [cell][channel].
func (a *aperture) profile(flux, level []float64) [][]float64 {
	channels := len(flux)
	all := table[float64](len(a.cells), channels)
	for i, k := range a.cells {
		if k.area == 0 {
			continue
		}
		a.share(all[i], i, flux, level)
	}
	for l := range channels {
		sum := 0.0
		for i, k := range a.cells {
			sum += k.area * all[i][l]
		}
		for i := range a.cells {
			if sum > 0 {
				all[i][l] /= sum
			}
		}
	}
	return all
}

// share fits a cell's light by flux times a polynomial.
func (a *aperture) share(dst []float64, i int, flux, level []float64) {
	const terms = profileDegree + 1
	normal, right := mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
	powers := func(l int) (p [terms]float64) {
		t := 2*float64(l)/float64(len(flux)) - 1
		p[0] = 1
		for e := 1; e < terms; e++ {
			p[e] = p[e-1] * t
		}
		return p
	}
	for l, f := range flux {
		if !a.good(i, l) {
			continue
		}
		p := powers(l)
		w := f / float64(a.variance[i][l])
		for e := range p {
			right.SetVec(e, right.AtVec(e)+w*p[e]*(float64(a.signal[i][l])-level[l]))
			for d := range e + 1 {
				normal.SetSym(e, d, normal.At(e, d)+w*f*p[e]*p[d])
			}
		}
	}
	var c mat.VecDense
	if err := c.SolveVec(normal, right); err != nil {
		return // a cell without good voxels has no share
	}
	for l := range dst {
		p := powers(l)
		for e, v := range p {
			dst[l] += v * c.AtVec(e)
		}
		dst[l] = max(dst[l], 0)
	}
}

// setOptimal sets the weights of a channel; none where the plain sum has none.
func (a *aperture) setOptimal(l int, profile, variance [][]float64) {
	sum, background, any := 0.0, 0.0, false
	for i, k := range a.cells {
		any = any || a.weight[i][l] != 0
		if a.good(i, l) {
			background += k.background
			if variance[i][l] > 0 {
				sum += profile[i][l] * profile[i][l] / variance[i][l]
			}
		}
	}
	if !any || !(sum > 0) {
		for i := range a.cells {
			a.weight[i][l] = 0
		}
		return
	}
	taken := 0.0
	for i := range a.cells {
		a.weight[i][l] = 0
		if a.good(i, l) && variance[i][l] > 0 {
			a.weight[i][l] = profile[i][l] / variance[i][l] / sum
			taken += a.weight[i][l]
		}
	}
	for i, k := range a.cells {
		if k.background > 0 && a.good(i, l) {
			a.weight[i][l] -= taken * k.background / background
		}
	}
}
