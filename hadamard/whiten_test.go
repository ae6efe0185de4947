package hadamard

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Whiten is the basis on readings, Square its square, with and without lost rows and
// pedestal.
func TestWhiten(t *testing.T) {
	code, err := New(TwinPrime, 143)
	require.NoError(t, err)
	all, err := NewChecks(code, []int{3, 17, 18, 40, 66, 71, 90, 101, 120, 131, 139, 142})
	require.NoError(t, err)
	without, err := all.WithoutRows([]int{5, 77})
	require.NoError(t, err)
	random := rand.New(rand.NewPCG(1, 2))
	for _, c := range []*Checks{all, all.WithoutPedestal(), without, without.WithoutPedestal()} {
		y := make([]float32, code.V())
		for i := range y {
			y[i] = float32(100 * random.NormFloat64())
		}
		decoded := make([]float32, code.V())
		NewDecoder(code).Decode(decoded, y, 1, 1)
		var residual []float64
		for _, j := range c.Columns() {
			residual = append(residual, float64(decoded[j]))
		}
		got, square := make([]float64, c.G()), 0.0
		c.Whiten(got, residual)
		for i, x := range got {
			want := 0.0
			for k, b := range c.Basis().RawRowView(i) {
				want += b * float64(y[k])
			}
			require.InDelta(t, want, x, 1e-3)
			square += x * x
		}
		require.InDelta(t, square, c.Square(residual), 1e-6*square)
	}
}
