package trial

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/instrument"
)

// lightKmS is the speed of light, km/s (exact, SI).
const lightKmS = 299792.458

// The spectra of a line that are measured: their line stands brightSigmas above the
// noise of its brightest voxel, which lies within lineSearch voxels of the line's
// own wavelength; lineWindow voxels on both sides of it are fitted.
const (
	brightSigmas = 10
	lineSearch   = 4
	lineWindow   = 4
)

// LineAgreement compares a line of a nebula in a cube with the truth's, spectrum by
// spectrum.
type LineAgreement struct {
	// Velocity is the mean of cube less truth in km/s, weighted by the truth's flux,
	// Error its standard error by the scatter, Scatter the weighted rms.
	Velocity, Error, Scatter float64
	// Worst is the largest of the same means in blockSide x blockSide parts of the
	// field, WorstError its standard error.
	Worst, WorstError float64
	// Flux is the line's in the cube over the truth's, FluxError its standard error.
	Flux, FluxError float64
	// N is the number of spectra.
	N int
}

// blockSide parts of the field's elements and rows, each with a mean of its own.
const blockSide = 5

// lineSample is a line in one spectrum: the truth's flux in voxels times electrons,
// the cube's, and how far its place is off in km/s.
type lineSample struct {
	block            int
	flux, cube, miss float64
}

// MeasureLine fits a Gaussian to the line of both cube and truth in every spectrum
// where it is bright and its surroundings are good.
func (c *Cube) MeasureLine(truth []float32, g instrument.Grid, vacuumNM float64) (*LineAgreement, error) {
	var samples []lineSample
	at := int(math.Round((vacuumNM - g.FirstNM) / g.StepNM))
	plane := c.N * c.Rows
	for p := range plane {
		s, ok := c.lineAt(truth, g, p, at)
		if ok {
			s.block = (p%c.N)*blockSide/c.N*blockSide + p/c.N*blockSide/c.Rows
			samples = append(samples, s)
		}
	}
	if len(samples) < 100 {
		return nil, fmt.Errorf("the line at %.2f nm is bright in %d spectra only", vacuumNM, len(samples))
	}
	return sumUp(samples), nil
}

// lineAt measures the line near voxel `at` of spectrum p.
func (c *Cube) lineAt(truth []float32, g instrument.Grid, p, at int) (s lineSample, ok bool) {
	plane := c.N * c.Rows
	if at-lineSearch-lineWindow < 0 || at+lineSearch+lineWindow >= c.Voxels {
		return s, false
	}
	brightest := at
	for l := at - lineSearch; l <= at+lineSearch; l++ {
		if truth[l*plane+p] > truth[brightest*plane+p] {
			brightest = l
		}
	}
	const n = 2*lineWindow + 1
	var voxels, model, values, weights [n]float64
	for k := range voxels {
		l := brightest - lineWindow + k
		i := l*plane + p
		if !c.Good(i) || truth[i] != truth[i] {
			return s, false
		}
		voxels[k], model[k], values[k] = float64(l), float64(truth[i]), float64(c.Signal[i])
		weights[k] = 1 / float64(c.Variance[i])
	}
	fit, ok := fitLine(voxels[:], model[:], weights[:], lineWindow)
	if !ok || fit.height*math.Sqrt(weights[lineWindow]) < brightSigmas {
		return s, false
	}
	found, ok := fitLine(voxels[:], values[:], weights[:], lineWindow)
	if !ok {
		return s, false
	}
	nm := g.WavelengthNM(fit.center)
	return lineSample{
		flux: fit.sigma * fit.heightOf(voxels[:], model[:], weights[:]), cube: fit.sigma * fit.heightOf(voxels[:], values[:], weights[:]),
		miss: (found.center - fit.center) * g.StepNM / nm * lightKmS,
	}, true
}

// weightedMean of values by weights with its standard error from their scatter.
// Resampled neighbours share pixels: N samples count as half as many.
func weightedMean(samples []lineSample) (mean, err, scatter float64, n int) {
	var w, wv float64
	for _, s := range samples {
		w += s.flux
		wv += s.flux * s.miss
	}
	mean = wv / w
	var square, square2 float64
	for _, s := range samples {
		d := s.miss - mean
		square += s.flux * d * d
		square2 += s.flux * s.flux * d * d
	}
	return mean, math.Sqrt(2*square2) / w, math.Sqrt(square / w), len(samples)
}

func sumUp(samples []lineSample) *LineAgreement {
	a := new(LineAgreement)
	a.Velocity, a.Error, a.Scatter, a.N = weightedMean(samples)
	var blocks [blockSide * blockSide][]lineSample
	var cube, flux float64
	for _, s := range samples {
		blocks[s.block] = append(blocks[s.block], s)
		cube, flux = cube+s.cube, flux+s.flux
	}
	a.Flux = cube / flux
	square := 0.0
	for _, s := range samples {
		square += (s.cube - a.Flux*s.flux) * (s.cube - a.Flux*s.flux)
	}
	a.FluxError = math.Sqrt(2*square) / flux
	for _, b := range blocks {
		if len(b) < 20 {
			continue
		}
		mean, err, _, _ := weightedMean(b)
		if math.Abs(mean)/max(3, 5*err) > math.Abs(a.Worst)/max(3, 5*a.WorstError) || a.WorstError == 0 {
			a.Worst, a.WorstError = mean, err
		}
	}
	return a
}

// Findings judge a line: velocities within 3 km/s and flux within 0.5 % of the
// truth in the mean.
func (a *LineAgreement) Findings(name string) []Finding {
	n := a.N / 2
	return []Finding{
		Near(name+": velocity less the truth's, weighted by flux, km/s", a.Velocity, 0, 3, a.Error, n),
		Near(name+": the same in the worst of 25 parts of the field, km/s", a.Worst, 0, 3, a.WorstError, n),
		Stated(name+": rms of the velocity of one spectrum, km/s", a.Scatter, n),
		Near(name+": flux over the truth's", a.Flux, 1, 0.005, a.FluxError, n),
	}
}

// WhiteLight judges the sum of all good voxels against the truth's: within 0.5 %.
func (c *Cube) WhiteLight(name string, truth []float32) Finding {
	var cube, scene, variance float64
	n := 0
	for i, t := range truth {
		if c.Good(i) && t == t {
			cube, scene, variance = cube+float64(c.Signal[i]), scene+float64(t), variance+float64(c.Variance[i])
			n++
		}
	}
	return Near(name+": white light over the truth's", cube/scene, 1, 0.005, math.Sqrt(2*variance)/scene, n/2)
}
