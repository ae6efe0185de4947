package trial

import (
	"math"
)

// lineReach is how far, in voxels, a line's light may lie from its peak: twice the
// FWHM of the widest profile.
const lineReach = 6

// InterpolationFindings compares a cube of a night without noise with the truth:
// what is left is the error of interpolation, which shall be below 0.5 % of a
// line's peak. It is asked twice. First of every good voxel, against the largest
// truth within 6 voxels along its spectrum: the peak of the line it belongs to,
// continuum included, or the continuum where there is no line. Then of the lines
// alone, against their height above the continuum, for all that reach a tenth of
// the brightest one: beside fainter ones the continuum's own error, of 0.3 % of
// the continuum at most, counts for more than the line's.
func InterpolationFindings(name string, c *Cube, truth []float32) []Finding {
	const limit = 0.005
	worst, n := 0.0, 0
	c.spectra(truth, func(good []bool, signal, truth []float64) {
		for l, t := range truth {
			if good[l] {
				n++
				worst = max(worst, math.Abs(signal[l]-t)/largest(truth, l))
			}
		}
	})
	ofLines, lines := c.lineErrors(truth)
	return []Finding{
		Below(name+": error of any good voxel over its line's peak", worst, limit, n),
		Below(name+": error around a line over its height above the continuum", ofLines, limit, lines),
	}
}

// lineErrors is the largest error within lineReach of a line over its height, and
// the number of lines looked at.
func (c *Cube) lineErrors(truth []float32) (worst float64, n int) {
	brightest := 0.0
	c.lines(truth, func(height, _ float64) { brightest = max(brightest, height) })
	c.lines(truth, func(height, err float64) {
		if height >= 0.1*brightest {
			n++
			worst = max(worst, err/height)
		}
	})
	return worst, n
}

// lines visits the local maxima along all spectra whose surroundings are good,
// with their height above the higher of the ends of their surroundings, and the
// largest error there.
func (c *Cube) lines(truth []float32, visit func(height, err float64)) {
	c.spectra(truth, func(good []bool, signal, truth []float64) {
		for l := lineReach; l < len(truth)-lineReach; l++ {
			if truth[l] < truth[l-1] || truth[l] <= truth[l+1] {
				continue
			}
			err, whole := 0.0, true
			for k := l - lineReach; k <= l+lineReach; k++ {
				whole = whole && good[k]
				err = max(err, math.Abs(signal[k]-truth[k]))
			}
			if height := truth[l] - max(truth[l-lineReach], truth[l+lineReach]); whole && height > 0 {
				visit(height, err)
			}
		}
	})
}

// spectra visits the spectrum of every element and row; the slices are reused.
func (c *Cube) spectra(truth []float32, visit func(good []bool, signal, truth []float64)) {
	good, signal, true := make([]bool, c.Voxels), make([]float64, c.Voxels), make([]float64, c.Voxels)
	plane := c.N * c.Rows
	for at := range plane {
		for l := range c.Voxels {
			i := l*plane + at
			good[l], signal[l], true[l] = c.Good(i) && truth[i] == truth[i], float64(c.Signal[i]), float64(truth[i])
		}
		visit(good, signal, true)
	}
}

func largest(truth []float64, l int) float64 {
	most := 0.0
	for _, t := range truth[max(0, l-lineReach):min(len(truth), l+lineReach+1)] {
		most = max(most, t)
	}
	return most
}
