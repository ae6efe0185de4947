package skyflux

import (
	"context"
	"math"

	"gonum.org/v1/gonum/mat"
)

// How a star's place in a wide element is found. Its spectrum at detector columns is
// known; which wavelengths they are depends on the element the star stands on. With the
// wrong one the ends of the band, the lines of its table and all else that the model has
// stand at wrong wavelengths, so that the ratio of light to model is no longer smooth.
const (
	// smoothDegree of the polynomial by which light may depart from the model.
	smoothDegree = 4
	// modelError, relative, is what the model is taken to lack in a voxel.
	modelError = 0.02
	// blurReach standard deviations hold the star's width.
	blurReach = 4
)

// airBands, vacuum nm, are where the air absorbs what no model knows (O2 and H2O; common
// practice, no source). Those about the ends of a filter are not left out.
var airBands = [][2]float64{{686, 696}, {716, 735}, {758, 772}, {813, 835}}

// blurred is the model as the star's width and the line spread show it.
func (w *Wide) blurred(sigmaElements float64) []float64 {
	n := len(w.Model)
	out := make([]float64, n)
	for l := range n {
		sigma := math.Hypot(w.Blur[l], sigmaElements*w.Slope[l])
		reach := int(math.Ceil(blurReach * sigma))
		sum, weight := 0.0, 0.0
		for k := l - reach; k <= l+reach; k++ {
			u := float64(k-l) / sigma
			g := math.Exp(-u * u / 2)
			m := w.Model[min(max(k, 0), n-1)]
			if !(m >= 0) {
				m = 0
			}
			sum, weight = sum+g*m, weight+g
		}
		out[l] = sum / weight
	}
	return out
}

// locate finds the element at which light over model is smoothest, and its error: +Inf
// where nothing tells.
func (w *Wide) locate(ctx context.Context, s *rowShape) (place, sigma float64, err error) {
	star, sky := w.apertureRows(s)
	if len(sky) < leastSkyRows {
		return 0, math.Inf(1), nil // said by addUp
	}
	even, model := w.evens(sky), w.blurred(w.sigmaElements(s))
	rough := func(at float64) float64 {
		counts, variance, part := w.sum(at, s, star, sky, even)
		return w.roughness(counts, variance, part, model)
	}
	best, least := 0.0, math.Inf(1)
	for j := w.First; j <= w.Last; j++ {
		if err := ctx.Err(); err != nil {
			return 0, 0, err
		}
		if c := rough(float64(j)); c < least {
			best, least = float64(j), c
		}
	}
	if math.IsInf(least, 1) {
		return 0, math.Inf(1), nil
	}
	step, curvature := 0.5, 0.0
	for range 3 {
		a, b, c := rough(best-step), rough(best), rough(best+step)
		curvature = (a - 2*b + c) / (step * step)
		if !(curvature > 0) || math.IsInf(curvature, 1) {
			return 0, math.Inf(1), nil
		}
		best += min(max((a-c)/(2*step*curvature), -1), 1)
		least = b
		step /= 2
	}
	if best < float64(w.First)-0.5 || best > float64(w.Last)+0.5 {
		return 0, math.Inf(1), nil
	}
	freedom := float64(len(model) - smoothDegree - 2)
	return best, math.Sqrt(2 / curvature * max(1, least/freedom)), nil
}

// roughness is the chi-square of light over the model times a polynomial.
func (w *Wide) roughness(counts, variance, part, model []float64) float64 {
	n := len(counts)
	var design, right []float64
	for l := range n {
		m := model[l] * part[l]
		if !(m > 0) || math.IsInf(variance[l], 1) || inBands(airBands, w.Edges[l], w.Edges[l+1]) {
			continue
		}
		weight := 1 / math.Sqrt(variance[l]+modelError*modelError*counts[l]*counts[l])
		u, power := 2*float64(l)/float64(n)-1, 1.0
		for range smoothDegree + 1 {
			design = append(design, weight*m*power)
			power *= u
		}
		right = append(right, weight*counts[l])
	}
	const columns = smoothDegree + 1
	if len(right) < n/2 {
		return math.Inf(1)
	}
	a, b := mat.NewDense(len(right), columns, design), mat.NewVecDense(len(right), right)
	var x, left mat.VecDense
	if err := x.SolveVec(a, b); err != nil {
		return math.Inf(1)
	}
	left.MulVec(a, &x)
	left.SubVec(b, &left)
	return mat.Dot(&left, &left)
}

func inBands(bands [][2]float64, fromNM, toNM float64) bool {
	for _, band := range bands {
		if max(fromNM, toNM) > band[0] && min(fromNM, toNM) < band[1] {
			return true
		}
	}
	return false
}
