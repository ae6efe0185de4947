package calib

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// ErrNoLight is returned, wrapped, when the frames of a fit hold too little light to
// fix what is asked for.
var ErrNoLight = errors.New("too little light")

// ColourRule says what a ColourFit fits. With l = L - L_c in nm, f_j the light of
// element j, L_j(x,y) its wavelength at a pixel and c_j Weights,
//
//	T(x,y) = sum_j c_j f_j(x,y) (p_0 + p_1 l + ... + p_Degree l^Degree) - curve Q,  l = L_j(x,y) - L_c.
type ColourRule struct {
	Degree int
	// Curve fits as well what is left of the detector's non-linearity. A charge e that
	// is read as e (1 - curve e) leaves in all-on - all-even - all-odd minus the curve
	// times Q = on^2 - even^2 - odd^2 = 2 even odd: 0.4 % at saturation looks like
	// d = -0.1 %. Field and slit need some relief: where all is lit alike, the two
	// cannot be told apart, and the errors say so.
	Curve bool
	// Weights of the elements; nil for all 1.
	Weights []float64
	// Clip, in sigmas, leaves pixels out that deviate from the robust level of their
	// row: cosmic rays.
	Clip float64
}

// NeighbourRule is that of the neighbour term d(L) = p_0 + p_1 l: T is all-on -
// all-even - all-odd + all-off of the lamp, which holds, for every pair of
// neighbours, d(L_j) f_j/2 + d(L_j+1) f_j+1/2: inner elements count 1, the ends 1/2.
// What closed mirrors leak cancels in T, from outside the field too. What is left of
// the detector's curve is fitted along.
func NeighbourRule(elements int) ColourRule {
	weights := make([]float64, elements)
	for j := range weights {
		weights[j] = 1
		if j == 0 || j == elements-1 {
			weights[j] = 0.5
		}
	}
	return ColourRule{Degree: 1, Curve: true, Weights: weights, Clip: 6}
}

// ColourFit gathers normal equations row by row. The sums of a row can be gathered
// apart and merged: give each row its own and Merge them in order, and the result
// does not depend on who did which.
type ColourFit struct {
	rule     ColourRule
	geometry Geometry
	elements int
	columns  int
	// wavelengths by the distance that they are dispersed, from -reach px on.
	table *dispersed

	normal        [maxTerms][maxTerms]float64
	right         [maxTerms]float64
	square        float64 // sum of w T^2
	pixels, clips int
	light         float64
}

// maxTerms: a cubic and a curve.
const maxTerms = 5

// ColourTerm is the result of a ColourFit: d(L) or e(L) with its errors.
type ColourTerm struct {
	CenterNM   float64
	Coef       []float64     // p_0 .. p_Degree, per nm^k
	Covariance *mat.SymDense // of Coef
	// Curve is the part of a charge lost per electron of it, 0 where it was not fitted.
	Curve, CurveError float64
	// Chi2 per degree of freedom; errors are widened by its root where it is above 1.
	Chi2            float64
	Pixels, Clipped int
}

// At is the value at a wavelength and its standard error.
func (c *ColourTerm) At(vacuumNm float64) (value, err float64) {
	l := vacuumNm - c.CenterNM
	power := make([]float64, len(c.Coef))
	for k := range power {
		power[k] = math.Pow(l, float64(k))
		value += c.Coef[k] * power[k]
	}
	p := mat.NewVecDense(len(power), power)
	return value, math.Sqrt(max(0, mat.Inner(p, c.Covariance, p)))
}

// Significance is the value at a wavelength in units of its error.
func (c *ColourTerm) Significance(vacuumNm float64) float64 {
	value, err := c.At(vacuumNm)
	return value / err
}

// Contrast is the light of open mirrors over that of closed ones at a wavelength, with
// its standard error; +Inf, +Inf where e is not positive. Decoded light, to which e
// refers, is what opening adds: open less closed.
func (c *ColourTerm) Contrast(vacuumNm float64) (ratio, err float64) {
	e, sigma := c.At(vacuumNm)
	if !(e > 0) {
		return math.Inf(1), math.Inf(1)
	}
	return 1 + 1/e, sigma / (e * e)
}

// NewColourFit begins a fit; g must have been checked.
func NewColourFit(rule ColourRule, g Geometry, elements, columns int) (*ColourFit, error) {
	switch {
	case elements < 1 || columns < 1:
		return nil, fmt.Errorf("colour fit: %d elements on %d columns", elements, columns)
	case rule.Degree < 0 || rule.Degree > maxTerms-2:
		return nil, fmt.Errorf("colour fit: degree %d; use 0 to %d", rule.Degree, maxTerms-2)
	case rule.Weights != nil && len(rule.Weights) != elements:
		return nil, fmt.Errorf("colour fit: %d weights for %d elements", len(rule.Weights), elements)
	}
	f := &ColourFit{rule: rule, geometry: g, elements: elements, columns: columns}
	f.table = newDispersed(&f.geometry, elements, columns)
	return f, nil
}

// Merge adds the sums of another fit of the same rule.
func (f *ColourFit) Merge(other *ColourFit) {
	for a := range f.normal {
		for b := range f.normal[a] {
			f.normal[a][b] += other.normal[a][b]
		}
		f.right[a] += other.right[a]
	}
	f.square += other.square
	f.light += other.light
	f.pixels += other.pixels
	f.clips += other.clips
}

// Fork is an empty fit that shares rule and tables, for another worker or row.
func (f *ColourFit) Fork() *ColourFit {
	return &ColourFit{rule: f.rule, geometry: f.geometry, elements: f.elements, columns: f.columns, table: f.table}
}
