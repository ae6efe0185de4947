package calib

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Centroid is a star in a picture [row][element].
type Centroid struct {
	Element, Row           float64 // from 0
	ElementErr, RowErr     float64 // standard errors; the scatter is in them where it is above the errors
	Light, Level           float64 // of the whole star; of the sky, a place
	ElementSigma, RowSigma float64 // of the Gaussian, in places: voxels are not square
	Chi2                   float64 // per degree of freedom
}

// centroidRounds bounds the fit; a star of S/N 10 takes about 10.
const centroidRounds = 60

// FitCentroid fits a Gaussian, its widths along both axes free, on a level sky to the
// places within reach of a guess, by damped least squares (Marquardt 1963, Journal of the
// Society for Industrial and Applied Mathematics 11, 431). Places without a positive, finite
// variance have no weight. elementSigma and rowSigma are guesses of the width. An error
// where no star is found within reach.
func FitCentroid(picture, variance []float64, elements int, element, row, elementSigma, rowSigma float64, reachElements, reachRows int) (*Centroid, error) {
	s := newCentroidFit(picture, variance, elements, int(math.Round(element)), int(math.Round(row)), reachElements, reachRows)
	if len(s.values) < 8 {
		return nil, fmt.Errorf("centroid: %d usable places around element %.1f, row %.1f are too few; give a star inside the field", len(s.values), element, row)
	}
	p := s.start(element, row, elementSigma, rowSigma)
	chi2, damping := s.chi2(p), 1e-3
	for range centroidRounds {
		step, ok := s.step(p, damping)
		if !ok {
			break
		}
		next := p
		for k := range next {
			next[k] += step[k]
		}
		c := s.chi2(next)
		if !(c < chi2) {
			if damping *= 10; damping > 1e10 {
				break
			}
			continue
		}
		done := chi2-c < 1e-9*chi2
		p, chi2, damping = next, c, damping/10
		if done {
			break
		}
	}
	return s.result(p, chi2, float64(reachElements), float64(reachRows), element, row)
}

// centroidParameters: peak, element, row, logarithms of the widths, level.
type centroidParameters [6]float64

type centroidFit struct{ values, weights, xs, ys []float64 }

func newCentroidFit(picture, variance []float64, elements, j0, y0, reachJ, reachY int) *centroidFit {
	s := new(centroidFit)
	rows := len(picture) / elements
	for y := max(0, y0-reachY); y < min(rows, y0+reachY+1); y++ {
		for j := max(0, j0-reachJ); j < min(elements, j0+reachJ+1); j++ {
			i := y*elements + j
			if v := variance[i]; v > 0 && !math.IsInf(v, 1) && !math.IsNaN(picture[i]) {
				s.values, s.weights = append(s.values, picture[i]), append(s.weights, 1/v)
				s.xs, s.ys = append(s.xs, float64(j)), append(s.ys, float64(y))
			}
		}
	}
	return s
}

// start: the level is the median of the places, the peak what the brightest of those
// near the guess adds.
func (s *centroidFit) start(element, row, elementSigma, rowSigma float64) centroidParameters {
	all := make([]float32, len(s.values))
	peak, atX, atY := math.Inf(-1), element, row
	for i, v := range s.values {
		all[i] = float32(v)
		if near := math.Hypot((s.xs[i]-element)/elementSigma, (s.ys[i]-row)/rowSigma); near <= 3 && v > peak {
			peak, atX, atY = v, s.xs[i], s.ys[i]
		}
	}
	level := float64(selectAt(all, len(all)/2))
	return centroidParameters{max(peak-level, 1e-3*math.Abs(level)), atX, atY, math.Log(elementSigma), math.Log(rowSigma), level}
}

// model is the value at place i and its derivatives by the parameters.
func (s *centroidFit) model(p centroidParameters, i int) (value float64, slopes centroidParameters) {
	sx, sy := math.Exp(p[3]), math.Exp(p[4])
	u, w := (s.xs[i]-p[1])/sx, (s.ys[i]-p[2])/sy
	g := math.Exp(-(u*u + w*w) / 2)
	a := p[0] * g
	return a + p[5], centroidParameters{g, a * u / sx, a * w / sy, a * u * u, a * w * w, 1}
}

func (s *centroidFit) chi2(p centroidParameters) float64 {
	sum := 0.0
	for i, v := range s.values {
		m, _ := s.model(p, i)
		sum += s.weights[i] * (v - m) * (v - m)
	}
	return sum
}

// normal gives the normal matrix and the gradient.
func (s *centroidFit) normal(p centroidParameters) (*mat.SymDense, *mat.VecDense) {
	n, right := mat.NewSymDense(len(p), nil), mat.NewVecDense(len(p), nil)
	for i, v := range s.values {
		m, slopes := s.model(p, i)
		d := mat.NewVecDense(len(p), slopes[:])
		n.SymRankOne(n, s.weights[i], d)
		right.AddScaledVec(right, s.weights[i]*(v-m), d)
	}
	return n, right
}

func (s *centroidFit) step(p centroidParameters, damping float64) (step centroidParameters, ok bool) {
	n, right := s.normal(p)
	for k := range p {
		n.SetSym(k, k, n.At(k, k)*(1+damping))
	}
	var chol mat.Cholesky
	x := mat.NewVecDense(len(p), nil)
	if !chol.Factorize(n) || chol.SolveVecTo(x, right) != nil {
		return step, false
	}
	copy(step[:], x.RawVector().Data)
	return step, true
}

func (s *centroidFit) result(p centroidParameters, chi2, reachJ, reachY, element, row float64) (*Centroid, error) {
	n, _ := s.normal(p)
	var chol mat.Cholesky
	var inverse mat.SymDense
	const leastSN = 5
	found := chol.Factorize(n) && chol.InverseTo(&inverse) == nil && math.Abs(p[1]-element) <= reachJ && math.Abs(p[2]-row) <= reachY
	scale := 1.0
	if freedom := len(s.values) - len(p); freedom > 0 {
		scale = chi2 / float64(freedom)
	}
	errors := math.Max(1, scale)
	if !found || !(p[0] > leastSN*math.Sqrt(errors*inverse.At(0, 0))) {
		return nil, fmt.Errorf("centroid: no star of S/N %d around element %.1f, row %.1f; check its coordinates or leave it out", leastSN, element, row)
	}
	sx, sy := math.Exp(p[3]), math.Exp(p[4])
	return &Centroid{
		Element: p[1], Row: p[2], ElementErr: math.Sqrt(errors * inverse.At(1, 1)), RowErr: math.Sqrt(errors * inverse.At(2, 2)),
		Light: 2 * math.Pi * p[0] * sx * sy, Level: p[5], ElementSigma: sx, RowSigma: sy, Chi2: scale,
	}, nil
}
