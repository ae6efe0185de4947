package hadamard

import (
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// A sum of squares of which rounding has made some eigenvalues negative is a covariance
// still, and the factor is its own; a matrix that is none stays refused.
func TestFactorised(t *testing.T) {
	plain, ridged := 0, 0
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(2, 40).Draw(t, "n")
		rank := rapid.IntRange(1, n).Draw(t, "rank")
		x := mat.NewDense(n, rank, nil)
		for i := range n {
			for j := range rank {
				x.Set(i, j, rapid.Float64Range(-1e6, 1e6).Draw(t, "x"))
			}
		}
		var square mat.Dense
		square.Mul(x, x.T())
		m := symmetric(&square)
		for i := range n {
			m.SetSym(i, i, m.At(i, i)+1e-6) // so that no diagonal is zero
		}
		var alone mat.Cholesky
		if alone.Factorize(m) {
			plain++
		} else {
			ridged++
		}
		factor, err := factorised(m)
		require.NoError(t, err)
		var back mat.SymDense
		factor.ToSym(&back)
		for i := range n {
			for j := range n {
				require.InDelta(t, square.At(i, j), back.At(i, j), 1e-9*mat.Norm(&square, 2)+1e-5)
			}
		}
	})
	require.NotZero(t, plain, "every matrix needed a ridge")
	require.NotZero(t, ridged, "no matrix needed a ridge")

	bad := mat.NewSymDense(2, []float64{1, 2, 2, 1})
	_, err := factorised(bad)
	require.ErrorIs(t, err, errNoCovariance)
}
