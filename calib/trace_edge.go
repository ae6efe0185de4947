package calib

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// edgeFit fits an edge to the mean of some columns.
type edgeFit struct {
	sign, sigma                   float64
	y, value, variance            []float64 // rows with a value
	light, lightX                 []float64 // by row: sums over columns of signal, signal times x
	nominal                       float64
	end, level, slope, background float64
	endErr, levelErr              float64
}

// newEdgeFit averages columns x0..x1-1 in rows first..last.
func newEdgeFit(e *Exposure, end RowEnd, fwhm float64, x0, x1, first, last int) *edgeFit {
	f := &edgeFit{sign: -1, sigma: fwhm / sigmasPerFWHM, nominal: end.Row}
	if end.Above {
		f.sign = 1
	}
	for y := first; y <= last; y++ {
		var sum, variance, n, sumX float64
		for x := x0; x < x1; x++ {
			v, s2, flag := e.at(x, y)
			if !(v == v) || flag&(Saturated|BadPixel|NoData) != 0 {
				continue
			}
			sum, variance, sumX, n = sum+v, variance+s2, sumX+v*float64(x), n+1
		}
		// A missing pixel matters little where light is even along x, and a lot where
		// it is a line: half of them must be there.
		if n >= float64(x1-x0)/2 {
			f.y, f.value, f.variance = append(f.y, float64(y)), append(f.value, sum/n), append(f.variance, variance/(n*n))
			f.light, f.lightX = append(f.light, sum), append(f.lightX, sumX)
		}
	}
	return f
}

// start puts the end where the light crosses the middle between its levels on both
// sides, the crossing nearest to nominal. It is false without one within reach.
func (f *edgeFit) start(reach float64) bool {
	var inside, outside []float32
	for i, y := range f.y {
		switch d := f.sign * (y - f.nominal); {
		case d > reach:
			inside = append(inside, float32(f.value[i]))
		case d < -reach:
			outside = append(outside, float32(f.value[i]))
		}
	}
	if len(inside) < 3 {
		return false
	}
	f.level = median(inside)
	if len(outside) >= 3 {
		f.background = median(outside)
	}
	f.level -= f.background
	half, nearest := f.background+f.level/2, math.Inf(1)
	for i := 1; i < len(f.y); i++ {
		a, b := f.value[i-1]-half, f.value[i]-half
		if f.y[i]-f.y[i-1] != 1 || f.sign*(b-a) <= 0 || a*b > 0 {
			continue
		}
		at := f.y[i-1] + a/(a-b)
		if d := math.Abs(at - f.nominal); d < nearest {
			nearest, f.end = d, at
		}
	}
	return nearest <= reach && f.level > 0
}

// solve iterates Gauss-Newton over end, level, slope and background, using rows within
// 2.5 FWHM of the end.
func (f *edgeFit) solve(reach float64) bool {
	for range maxSteps {
		normal, right, chi2, n := f.normal()
		var chol mat.Cholesky
		step := mat.NewVecDense(4, nil)
		if n < 6 || !chol.Factorize(normal) || chol.SolveVecTo(step, right) != nil {
			return false
		}
		move := min(max(step.AtVec(0), -1), 1)
		f.end += move
		f.level += step.AtVec(1)
		f.slope += step.AtVec(2)
		f.background += step.AtVec(3)
		if math.Abs(f.end-f.nominal) > reach || !(f.level > 0) {
			return false
		}
		if math.Abs(move) < 1e-4 {
			var inverse mat.SymDense
			if chol.InverseTo(&inverse) != nil {
				return false
			}
			scale := math.Sqrt(max(1, chi2/float64(n-4)))
			f.endErr, f.levelErr = scale*math.Sqrt(inverse.At(0, 0)), scale*math.Sqrt(inverse.At(1, 1))
			return true
		}
	}
	return false
}

// normal is J'WJ, J'W(value - model), the misfit and the number of rows.
func (f *edgeFit) normal() (*mat.SymDense, *mat.VecDense, float64, int) {
	normal, right := mat.NewSymDense(4, nil), mat.NewVecDense(4, nil)
	chi2, n := 0.0, 0
	for i, y := range f.y {
		d := y - f.end
		if math.Abs(d) > 2.5*sigmasPerFWHM*f.sigma {
			continue
		}
		share := phi(f.sign * d / f.sigma)
		plateau := f.level + f.slope*d
		row := [4]float64{-plateau*f.sign*normalDensity(d/f.sigma)/f.sigma - f.slope*share, share, d * share, 1}
		miss := f.value[i] - f.background - plateau*share
		w := 1 / f.variance[i]
		chi2, n = chi2+w*miss*miss, n+1
		for a := range row {
			right.SetVec(a, right.AtVec(a)+w*row[a]*miss)
			for b := a; b < len(row); b++ {
				normal.SetSym(a, b, normal.At(a, b)+w*row[a]*row[b])
			}
		}
	}
	return normal, right, chi2, n
}

// meanX is the mean column of the light within a FWHM of the end.
func (f *edgeFit) meanX() float64 {
	var light, lightX float64
	for i, y := range f.y {
		if math.Abs(y-f.end) <= sigmasPerFWHM*f.sigma {
			light, lightX = light+f.light[i], lightX+f.lightX[i]
		}
	}
	return lightX / light
}
