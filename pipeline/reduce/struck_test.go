package reduce

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/hadamard"
)

// Pixels that a cosmic ray struck in one frame are dropped; of those that were not,
// whether their throughput drifts or not, hardly any.
func TestDropStruck(t *testing.T) {
	const pixels, stride, light, drift = 600, 640, 400.0, 0.1
	code, err := hadamard.New(hadamard.MSequence, 63)
	require.NoError(t, err)
	dark, err := hadamard.ChooseDark(t.Context(), code, 16, 1)
	require.NoError(t, err)
	checks, err := hadamard.NewChecks(code, dark.Columns)
	require.NoError(t, err)
	basis := checks.WithoutPedestal().Basis()
	r := rand.New(rand.NewPCG(5, 6))
	isDark := map[int]bool{}
	for _, j := range dark.Columns {
		isDark[j] = true
	}
	y, s2 := make([]float32, 63*stride), make([]float32, 63*stride)
	c := make([]float64, 63)
	for k := range c {
		c[k] = 1 + drift*r.NormFloat64()
	}
	for p := range pixels {
		f := make([]float64, 63)
		for j := range f {
			if !isDark[j] {
				f[j] = light / 24 * (0.5 + r.Float64())
			}
		}
		for k := range 63 {
			sum := 0.0
			for j, x := range f {
				sum += x * float64(code.Bit(k, j))
			}
			y[k*stride+p] = float32(c[k]*sum + 20*r.NormFloat64())
			s2[k*stride+p] = 400
		}
		if p%2 == 1 {
			y[(p%63)*stride+p] += 3000
		}
	}
	require.GreaterOrEqual(t, dropStruck(y, s2, pixels, stride, basis), pixels/2)
	missed, lost := 0, 0
	for p := range pixels {
		dropped := y[p] != y[p]
		switch {
		case p%2 == 1 && !dropped:
			missed++
		case p%2 == 0 && dropped:
			lost++
		}
	}
	require.Zero(t, missed)
	require.LessOrEqual(t, lost, 6, "of 300 pixels that were not struck")
}
