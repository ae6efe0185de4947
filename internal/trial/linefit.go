package trial

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// lineFit is a Gaussian on a constant, fitted to a few voxels by weighted least
// squares: height exp(-(l - center)^2/(2 sigma^2)) + level, l in voxels.
type lineFit struct{ height, center, sigma, level float64 }

// fitPasses of Gauss and Newton from a start within a voxel of the line.
const fitPasses = 12

// fitLine starts at voxel `at`, the brightest. ok is false where the fit leaves the
// window, or its width is none of a line.
func fitLine(voxels, values, weights []float64, at int) (f lineFit, ok bool) {
	low := values[0]
	for _, v := range values {
		low = min(low, v)
	}
	f = lineFit{height: values[at] - low, center: voxels[at], sigma: 1.4, level: low}
	for range fitPasses {
		var normal mat.SymDense
		var right, step mat.VecDense
		normal.ReuseAsSym(4)
		right.ReuseAsVec(4)
		for i, l := range voxels {
			u := (l - f.center) / f.sigma
			e := math.Exp(-u * u / 2)
			slope := [4]float64{e, f.height * e * u / f.sigma, f.height * e * u * u / f.sigma, 1}
			miss := values[i] - f.height*e - f.level
			for a := range slope {
				right.SetVec(a, right.AtVec(a)+weights[i]*slope[a]*miss)
				for b := range a + 1 {
					normal.SetSym(a, b, normal.At(a, b)+weights[i]*slope[a]*slope[b])
				}
			}
		}
		if err := step.SolveVec(&normal, &right); err != nil {
			return f, false
		}
		f.height += step.AtVec(0)
		f.center += min(max(step.AtVec(1), -1), 1)
		f.sigma += min(max(step.AtVec(2), -0.3), 0.3)
		f.level += step.AtVec(3)
		if !(f.sigma > 0.5 && f.sigma < 4 && f.center > voxels[0] && f.center < voxels[len(voxels)-1]) {
			return f, false
		}
	}
	return f, true
}

// heightOf is the height of values at f's place and width, above a level of their
// own: linear in the values, so that noise does not bias it.
func (f lineFit) heightOf(voxels, values, weights []float64) float64 {
	var w, e, ee, v, ev float64
	for i, l := range voxels {
		u := (l - f.center) / f.sigma
		g := math.Exp(-u * u / 2)
		w += weights[i]
		e += weights[i] * g
		ee += weights[i] * g * g
		v += weights[i] * values[i]
		ev += weights[i] * g * values[i]
	}
	return (w*ev - e*v) / (w*ee - e*e)
}
