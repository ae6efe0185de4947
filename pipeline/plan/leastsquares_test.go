package plan_test

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
)

// leastSquaresNoise is the rms error of the columns that are not dark, readings of unit
// variance of some rows alone given; ok is false where these do not tell the columns.
func leastSquaresNoise(code *hadamard.Code, dark, rows []int) (rms float64, ok bool) {
	var lit []int
	for j := range code.V() {
		if !slices.Contains(dark, j) {
			lit = append(lit, j)
		}
	}
	m := mat.NewDense(len(rows), len(lit), nil)
	for i, k := range rows {
		for c, j := range lit {
			m.Set(i, c, float64(code.Bit(k, j)))
		}
	}
	var square mat.SymDense
	square.SymOuterK(1, m.T())
	var factor mat.Cholesky
	if !factor.Factorize(&square) || factor.Cond() > 1e10 {
		return 0, false
	}
	var inverse mat.SymDense
	if err := factor.InverseTo(&inverse); err != nil {
		return 0, false
	}
	return math.Sqrt(mat.Trace(&inverse) / float64(len(lit))), true
}
