package hadamard

import (
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// TestCovarianceMeetsNaive: every pair of columns against A diag(s2) A'
// multiplied out.
func TestCovarianceMeetsNaive(t *testing.T) {
	for _, v := range []int{3, 7, 15, 31, 63} {
		c := mustCode(t, MSequence, v)
		d := NewDecoder(c)
		require.True(t, d.CovarianceByColumn())
		const pixels, stride = 3, 4
		s2, dst := randomBlock(uint64(v), v, stride), make([]float32, v*stride)
		d.Covariance(dst, s2, pixels, stride)
		for p := range pixels {
			diagonal := make([]float64, v)
			for i := range diagonal {
				diagonal[i] = float64(s2[i*stride+p])
			}
			var weighted, want mat.Dense
			weighted.Mul(inverseOf(c), mat.NewDiagDense(v, diagonal))
			want.Mul(&weighted, inverseOf(c).T())
			for j := range v {
				require.Equal(t, -1, d.CovarianceColumn(j, j))
				for other := range j {
					m := d.CovarianceColumn(j, other)
					require.Equal(t, m, d.CovarianceColumn(other, j))
					require.InDelta(t, want.At(j, other), dst[m*stride+p], 1e-6*want.At(0, 0))
				}
			}
		}
	}
	other := NewDecoder(mustCode(t, Legendre, 7))
	require.False(t, other.CovarianceByColumn())
	require.Panics(t, func() { other.Covariance(make([]float32, 7), make([]float32, 7), 1, 1) })
	require.Panics(t, func() { other.CovarianceColumn(1, 2) })
}
