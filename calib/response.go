package calib

// Response is what light loses between the slit and the pixels, by element j, trace
// row y and voxel L: R = s(j,y) b(j,L), with mean 1 over the fully lit field, so that
// dividing by it conserves the flux. Immutable: any number of goroutines may share it.
type Response struct {
	Elements, Rows, Voxels int
	// Slit is s, [row][element]; Band is b, [element][voxel]. The variances are
	// relative: var(s)/s^2 and var(b)/b^2.
	Slit, SlitVariance []float32
	// SlitRaw is the light of each row and element as measured, over the smooth course of
	// s along the slit, also where a row was left out of the fit; NaN where there was no
	// light to measure.
	SlitRaw            []float32
	Band, BandVariance []float32
	// SlitFlags and BandFlags hold LowFlat where the flat does not tell; the factor
	// is 1 there.
	SlitFlags, BandFlags []Flag
	// Colour is the lamp's departure from its known light, [voxel], mean 1.
	Colour []float64
	// Period, in voxels, is the one chosen for Smoother; Chi2 is the squared
	// deviation of the raw efficiency from the smooth one per degree of freedom, in
	// units of the noise: near 1, or the efficiency has structure that is not smooth.
	Period, Chi2 float64
}

// At is the response of one voxel with its variance and flags.
func (r *Response) At(element, row, voxel int) (factor, variance float32, flags Flag) {
	s, b := row*r.Elements+element, element*r.Voxels+voxel
	factor = r.Slit[s] * r.Band[b]
	return factor, factor * factor * (r.SlitVariance[s] + r.BandVariance[b]), r.SlitFlags[s] | r.BandFlags[b]
}

// Divide takes the response out of all voxels of an element and row, in place:
//
//	signal / R,   variance / R^2 + (signal / R)^2 var(R)/R^2
//
// and adds LowFlat to flags. NaN stays. It costs some five operations a voxel.
// The error of R is shared by the voxels of a row, and of an element: within
// Period it does not average down.
func (r *Response) Divide(signal, variance []float32, flags []Flag, element, row int) {
	at := row*r.Elements + element
	slit, own, low := 1/r.Slit[at], r.SlitVariance[at], r.SlitFlags[at]
	from := element * r.Voxels
	band := r.Band[from:][:len(signal)]
	shared := r.BandVariance[from:][:len(signal)]
	lows := r.BandFlags[from:][:len(signal)]
	variance, flags = variance[:len(signal)], flags[:len(signal)]
	for l, v := range signal {
		inverse := slit / band[l]
		v *= inverse
		signal[l] = v
		variance[l] = variance[l]*inverse*inverse + v*v*(own+shared[l])
		flags[l] |= low | lows[l]
	}
}
