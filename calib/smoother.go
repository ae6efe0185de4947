package calib

import (
	"fmt"
	"math"
	"slices"
)

// Smoother draws a smooth curve through values at equal steps: the z that minimises
//
//	sum_i (y_i - z_i)^2 / var_i + lambda sum (third difference of z)^2
//
// (Whittaker 1923, Proceedings of the Edinburgh Mathematical Society 41, 63, and
// Henderson 1924; the discrete form of Reinsch's 1967 smoothing spline, Numerische
// Mathematik 10, 177). A wave of period p keeps 1/(1 + (Period/p)^6) of its
// amplitude, about: that fixes lambda to (2 sin(pi/Period))^-6 times the median of
// 1/var. Polynomials of degree 2 pass whole. Values without weight are bridged, and
// beyond the last one the curve goes on as a parabola, with the variance of one.
type Smoother struct {
	Period float64 // steps, above 2
}

const smootherOrder = 3 // of the differences

// Smooth writes the curve and its variance for values with variances; a variance
// that is not positive and finite, or a value that is not finite, has no weight. At
// least 3 must have one. dst may be values.
//
// The variance is Wahba's (1983, Journal of the Royal Statistical Society B 45,
// 133), the diagonal of (W + lambda D'D)^-1: noise, and averaged over the curve also
// what smoothing has taken away, when Period suits the curve (Nychka 1988, Journal
// of the American Statistical Association 83, 1134). fit tells how well it does.
func (s Smoother) Smooth(dst, variance, values, variances []float64) (fit SmoothFit, err error) {
	n := len(values)
	if len(dst) != n || len(variance) != n || len(variances) != n {
		return fit, fmt.Errorf("smoothing: %d values, %d variances and %d results are not the same number", n, len(variances), len(dst))
	}
	if !(s.Period > 2) || math.IsInf(s.Period, 1) {
		return fit, fmt.Errorf("smoothing: a period of %g steps cannot be smoothed over; give more than 2", s.Period)
	}
	weights, some := make([]float64, n), make([]float64, 0, n)
	for i, v := range variances {
		if v > 0 && !math.IsInf(v, 1) && !math.IsNaN(values[i]) && !math.IsInf(values[i], 0) {
			weights[i] = 1 / v
			some = append(some, weights[i])
			fit.Points++
		}
	}
	if fit.Points < smootherOrder {
		return fit, fmt.Errorf("smoothing: %d of %d values can be used; %d are the least", fit.Points, n, smootherOrder)
	}
	slices.Sort(some)
	lambda := some[len(some)/2] * math.Pow(2*math.Sin(math.Pi/s.Period), -2*smootherOrder)
	system := newBandSystem(weights, lambda)
	right := make([]float64, n)
	for i, w := range weights {
		if w > 0 {
			right[i] = w * values[i]
		}
	}
	system.solve(right)
	system.inverseDiagonal(variance)
	for i, w := range weights {
		if w > 0 {
			miss := values[i] - right[i]
			fit.Chi2 += w * miss * miss
			fit.Freedom += w * variance[i]
		}
	}
	copy(dst, right)
	return fit, nil
}

// SmoothFit is the quality of a smooth curve.
type SmoothFit struct {
	Points  int     // values with weight
	Chi2    float64 // sum of (value - curve)^2/variance
	Freedom float64 // of the curve: the trace of its smoothing matrix
}

// Risk is the expected squared error of the curve in units of the variances, but
// for a constant (Mallows 1973, Technometrics 15, 661): the Period that makes it
// smallest suits best. Sum it over curves that are to share one.
func (f SmoothFit) Risk() float64 { return f.Chi2 + 2*f.Freedom - float64(f.Points) }

// A bandSystem is W + lambda D'D, symmetric with smootherOrder bands on each side,
// as L diag(d) L'; below[i][k-1] is L[i+k][i].
type bandSystem struct {
	d     []float64
	below [][smootherOrder]float64
}

func newBandSystem(weights []float64, lambda float64) *bandSystem {
	n := len(weights)
	s := &bandSystem{d: make([]float64, n), below: make([][smootherOrder]float64, n)}
	copy(s.d, weights)
	difference := [smootherOrder + 1]float64{-1, 3, -3, 1}
	for first := 0; first+smootherOrder < n; first++ {
		for a, p := range difference {
			s.d[first+a] += lambda * p * p
			for b := a + 1; b < len(difference); b++ {
				s.below[first+a][b-a-1] += lambda * p * difference[b]
			}
		}
	}
	for i := range s.d {
		column := s.below[i]
		for k, v := range column {
			if i+k+1 >= n {
				break
			}
			l := v / s.d[i]
			s.below[i][k] = l
			s.d[i+k+1] -= l * v
			for m := k + 1; m < smootherOrder && i+m+1 < n; m++ {
				s.below[i+k+1][m-k-1] -= l * column[m]
			}
		}
	}
	return s
}

// solve replaces the right side by the solution.
func (s *bandSystem) solve(x []float64) {
	n := len(x)
	for i := range x {
		for k := range min(smootherOrder, n-1-i) {
			x[i+k+1] -= s.below[i][k] * x[i]
		}
	}
	for i := n - 1; i >= 0; i-- {
		x[i] /= s.d[i]
		for k := range min(smootherOrder, n-1-i) {
			x[i] -= s.below[i][k] * x[i+k+1]
		}
	}
}

// inverseDiagonal computes the diagonal of the inverse from its entries within the
// band, from the last row up (Hutchinson and de Hoog 1985, Numerische Mathematik 47,
// 99): Z = D^-1 L^-1 + (I - L') Z.
func (s *bandSystem) inverseDiagonal(dst []float64) {
	const p = smootherOrder
	n := len(dst)
	// near[k][m] is Z[i+1+k][i+1+m] for the row i at work, symmetric.
	var near [p][p]float64
	for i := n - 1; i >= 0; i-- {
		size := min(p, n-1-i)
		var row [p]float64 // Z[i][i+1+m]
		diagonal := 1 / s.d[i]
		for m := range size {
			for k := range size {
				row[m] -= s.below[i][k] * near[k][m]
			}
		}
		for k := range size {
			diagonal -= s.below[i][k] * row[k]
		}
		dst[i] = diagonal
		for k := p - 1; k > 0; k-- {
			for m := p - 1; m > 0; m-- {
				near[k][m] = near[k-1][m-1]
			}
		}
		near[0][0] = diagonal
		for m := 1; m < p; m++ {
			near[0][m], near[m][0] = row[m-1], row[m-1]
		}
	}
}
