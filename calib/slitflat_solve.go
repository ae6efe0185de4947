package calib

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Solve turns the sums of a pass into the response, and makes it the template of the
// next pass. An error wraps ErrNoLight where no voxel of a fully lit row has light.
func (f *FlatFit) Solve() (*Response, error) {
	r := &Response{
		Elements: f.elements, Rows: f.rows, Voxels: f.voxels,
		Slit: make([]float32, f.rows*f.elements), SlitVariance: make([]float32, f.rows*f.elements),
		SlitFlags: make([]Flag, f.rows*f.elements), SlitRaw: make([]float32, f.rows*f.elements),
		Band: make([]float32, f.elements*f.voxels), BandVariance: make([]float32, f.elements*f.voxels),
		BandFlags: make([]Flag, f.elements*f.voxels),
	}
	colour, err := f.colour()
	if err != nil {
		return nil, err
	}
	r.Colour = colour
	b := f.bands(colour)
	if err := f.smoothBands(r, b); err != nil {
		return nil, err
	}
	scales := f.rescale(r, b)
	f.smoothSlits(r, scales)
	f.normalise(r)
	f.flagLow(r)
	f.nextTemplate(r)
	return r, nil
}

// efficiency is the raw b of one element with its variance, by voxel; 0 variance
// where it was not measured.
type efficiency struct{ value, variance []float64 }

// raw gives b colour of voxel l, element j, as measured, and its variance.
func (f *FlatFit) raw(l, j int) (value, variance float64, ok bool) {
	i := l*f.elements + j
	if !(f.bandBottom[i] > 0) {
		return 0, 0, false
	}
	// Rows that share pixels along the slit are counted once.
	return f.bandTop[i] / f.bandBottom[i], f.rule.AlongSlit / f.bandBottom[i], true
}

// colour fits the mean over the elements of their raw efficiencies, each divided by
// its own mean, by a polynomial with mean 1.
func (f *FlatFit) colour() ([]float64, error) {
	level := make([]float64, f.elements)
	for j := range level {
		var sum, weight float64
		for l := range f.voxels {
			if v, variance, ok := f.raw(l, j); ok {
				sum += v / variance
				weight += 1 / variance
			}
		}
		if weight > 0 && sum > 0 {
			level[j] = sum / weight
		}
	}
	terms := f.rule.ColourDegree + 1
	normal, right := mat.NewSymDense(terms, nil), mat.NewVecDense(terms, nil)
	used := 0
	for l := range f.voxels {
		// Every element counts alike: what is common to them is wanted.
		sum, n := 0.0, 0.0
		for j := range f.elements {
			if v, _, ok := f.raw(l, j); ok && level[j] > 0 {
				sum += v / level[j]
				n++
			}
		}
		if n == 0 {
			continue
		}
		used++
		for a, p := range legendre(f.place(l), terms) {
			right.SetVec(a, right.AtVec(a)+p*sum)
			for c, q := range legendre(f.place(l), terms)[a:] {
				normal.SetSym(a, a+c, normal.At(a, a+c)+n*p*q)
			}
		}
	}
	var factor mat.Cholesky
	if used < terms || !factor.Factorize(normal) {
		return nil, fmt.Errorf("flat: %w: %d voxels of fully lit rows have light; is the lamp on, and the slit where the profile says?", ErrNoLight, used)
	}
	var coef mat.VecDense
	if err := factor.SolveVecTo(&coef, right); err != nil {
		return nil, fmt.Errorf("flat: %w", err)
	}
	return f.polynomial(&coef)
}

func (f *FlatFit) polynomial(coef *mat.VecDense) ([]float64, error) {
	colour, mean := make([]float64, f.voxels), 0.0
	for l := range colour {
		for a, p := range legendre(f.place(l), coef.Len()) {
			colour[l] += coef.AtVec(a) * p
		}
		mean += colour[l] / float64(f.voxels)
	}
	for l := range colour {
		colour[l] /= mean
		if !(colour[l] > 0) {
			return nil, fmt.Errorf("flat: %w: the lamp's colour falls to %.2g of its mean at voxel %d; is it the lamp that the sequence names?", ErrNoLight, colour[l], l)
		}
	}
	return colour, nil
}

// place is a voxel's place in the band, -1 to 1.
func (f *FlatFit) place(l int) float64 {
	return 2*float64(l)/float64(max(1, f.voxels-1)) - 1
}

// legendre gives the Legendre polynomials of degree 0..n-1 at x.
func legendre(x float64, n int) []float64 {
	p := make([]float64, n)
	for k := range p {
		switch k {
		case 0:
			p[k] = 1
		case 1:
			p[k] = x
		default:
			p[k] = (float64(2*k-1)*x*p[k-1] - float64(k-1)*p[k-2]) / float64(k)
		}
	}
	return p
}

// bands takes the colour out of the raw efficiencies.
func (f *FlatFit) bands(colour []float64) []efficiency {
	out := make([]efficiency, f.elements)
	for j := range out {
		out[j] = efficiency{make([]float64, f.voxels), make([]float64, f.voxels)}
		for l, c := range colour {
			if v, variance, ok := f.raw(l, j); ok {
				out[j].value[l] = v / c
				out[j].variance[l] = variance * f.rule.AlongWavelength / (c * c)
			}
		}
	}
	return out
}

// periodSteps: four candidates for the smoothing an octave.
const periodSteps = 4

// smoothBands chooses the period of least risk and puts the smooth efficiencies, with
// mean 1 over their measured voxels, into r.
func (f *FlatFit) smoothBands(r *Response, b []efficiency) error {
	least := math.Inf(1)
	for step := 0; ; step++ {
		period := f.rule.ShortestPeriod * math.Pow(2, float64(step)/periodSteps)
		if step > 0 && period > f.rule.LongestPeriod*1.001 {
			break
		}
		risk, chi2, err := f.smoothAll(nil, b, period)
		if err != nil {
			return err
		}
		if risk < least {
			least, r.Period, r.Chi2 = risk, period, chi2
		}
	}
	_, _, err := f.smoothAll(r, b, r.Period)
	return err
}

// smoothAll smooths every element that has light, and keeps the result in r unless
// that is nil.
func (f *FlatFit) smoothAll(r *Response, b []efficiency, period float64) (risk, chi2 float64, err error) {
	value, variance := make([]float64, f.voxels), make([]float64, f.voxels)
	freedom, some := 0.0, false
	for j := range b {
		fit, errFit := (Smoother{period}).Smooth(value, variance, b[j].value, b[j].variance)
		if errFit != nil {
			continue // too dark: flagLow voids it
		}
		some = true
		risk += fit.Risk()
		// Neighbouring voxels share noise: their scatter is less than their errors.
		chi2 += fit.Chi2 * f.rule.AlongWavelength
		freedom += float64(fit.Points) - fit.Freedom
		if r != nil {
			b[j].keep(r, j, value, variance)
		}
	}
	if !some {
		return 0, 0, fmt.Errorf("flat: %w: no element has light; is the lamp on?", ErrNoLight)
	}
	return risk, chi2 / max(1, freedom), nil
}

// keep normalises a smooth efficiency to a mean of 1 over the measured voxels.
func (e *efficiency) keep(r *Response, j int, value, variance []float64) {
	mean, n := 0.0, 0.0
	for l, v := range e.variance {
		if v > 0 {
			mean += value[l]
			n++
		}
	}
	mean /= n
	for l, v := range value {
		r.Band[j*r.Voxels+l] = float32(v / mean)
		r.BandVariance[j*r.Voxels+l] = float32(variance[l] / (v * v))
	}
}

// rescale tells by what to multiply the slit functions, which were fitted to the
// template, now that colour and efficiency have taken its place.
func (f *FlatFit) rescale(r *Response, b []efficiency) []float64 {
	scales := make([]float64, f.elements)
	for j := range scales {
		var top, bottom float64
		for l, lamp := range f.lamp {
			if b[j].variance[l] > 0 {
				w := f.bandBottom[l*f.elements+j] / (lamp * lamp)
				now := lamp * r.Colour[l] * float64(r.Band[j*f.voxels+l])
				top += w * float64(f.template[l*f.elements+j]) * now
				bottom += w * now * now
			}
		}
		if bottom > 0 {
			scales[j] = top / bottom
		}
	}
	return scales
}

// smoothSlits puts the slit functions into r: the measured value of a row drawn
// towards the smooth course along the slit, as far as the scatter of all values
// around it is noise; the course itself where a row is not fully lit.
func (f *FlatFit) smoothSlits(r *Response, scales []float64) {
	course, spread := make([]float64, f.rows), make([]float64, f.rows)
	value, variance := make([]float64, f.rows), make([]float64, f.rows)
	for j, scale := range scales {
		for y := range f.rows {
			at := y*f.elements + j
			value[y], variance[y] = 0, 0
			if f.fullyLit(at) && f.slitBottom[at] > 0 && scale > 0 {
				value[y] = scale * f.slitTop[at] / f.slitBottom[at]
				variance[y] = f.rule.AlongWavelength * scale * scale / f.slitBottom[at]
			}
		}
		fit, err := (Smoother{f.rule.SlitPeriod}).Smooth(course, spread, value, scaled(variance, f.rule.AlongSlit))
		keep := 0.0
		if excess := fit.Chi2*f.rule.AlongSlit/max(1, float64(fit.Points)-fit.Freedom) - 1; excess > 0 {
			keep = excess / (1 + excess)
		}
		for y := range f.rows {
			at := y*f.elements + j
			r.SlitRaw[at] = float32(scale * f.slitTop[at] / f.slitBottom[at] / course[y])
			switch {
			case err != nil:
				r.Slit[at], r.SlitFlags[at] = 1, LowFlat
			case variance[y] > 0:
				s := course[y] + keep*(value[y]-course[y])
				r.Slit[at] = float32(s)
				r.SlitVariance[at] = float32(((1-keep)*spread[y] + keep*variance[y]) / (s * s))
			default:
				r.Slit[at] = float32(course[y])
				r.SlitVariance[at] = float32(spread[y] / (course[y] * course[y]))
			}
		}
	}
}

func scaled(v []float64, factor float64) []float64 {
	out := make([]float64, len(v))
	for i, x := range v {
		out[i] = x * factor
	}
	return out
}

// normalise makes the mean of s b over the measured voxels of fully lit rows 1.
func (f *FlatFit) normalise(r *Response) {
	var sum, n float64
	for j := range f.elements {
		var slit, rows, band, voxels float64
		for y := range f.rows {
			if at := y*f.elements + j; f.fullyLit(at) && f.slitBottom[at] > 0 && r.SlitFlags[at] == 0 {
				slit += float64(r.Slit[at])
				rows++
			}
		}
		for l := range f.voxels {
			if f.bandBottom[l*f.elements+j] > 0 {
				band += float64(r.Band[j*f.voxels+l])
				voxels++
			}
		}
		sum += slit * band
		n += rows * voxels
	}
	for i := range r.Slit {
		if r.SlitFlags[i] == 0 {
			r.Slit[i] *= float32(n / sum)
		}
	}
}

// flagLow voids what is too low or too uncertain to divide by.
func (f *FlatFit) flagLow(r *Response) {
	limit := float32(f.rule.MaxError * f.rule.MaxError)
	void := func(factor, variance []float32, flags []Flag) {
		for i, v := range factor {
			if !(float64(v) >= f.rule.Floor) || !(variance[i] <= limit) || flags[i] != 0 {
				factor[i], variance[i], flags[i] = 1, 0, LowFlat
			}
		}
	}
	void(r.Slit, r.SlitVariance, r.SlitFlags)
	void(r.Band, r.BandVariance, r.BandFlags)
	for l, lamp := range f.lamp {
		if lamp == 0 {
			for j := range f.elements {
				i := j*f.voxels + l
				r.Band[i], r.BandVariance[i], r.BandFlags[i] = 1, 0, LowFlat
			}
		}
	}
}

// nextTemplate begins the next pass.
func (f *FlatFit) nextTemplate(r *Response) {
	for l, lamp := range f.lamp {
		for j := range f.elements {
			f.template[l*f.elements+j] = float32(lamp * r.Colour[l] * float64(r.Band[j*f.voxels+l]))
		}
	}
	clear(f.slitTop)
	clear(f.slitBottom)
	clear(f.bandTop)
	clear(f.bandBottom)
}
