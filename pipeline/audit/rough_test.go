package audit

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// The quick excess of a pairing is that of a state with the same factors, frames
// missing or not.
func TestRougherMeetsStates(t *testing.T) {
	f := newField(t, 31, 12, 60, 8, 3)
	c := f.expose(f.night(0.05, 0.3, 1), 1)
	e, err := newEngine(c)
	require.NoError(t, err)
	rapid.Check(t, func(t *rapid.T) {
		from := rapid.Permutation(c.Pairing).Draw(t, "from")
		for _, k := range rapid.SliceOfNDistinct(rapid.IntRange(0, 30), 0, 13, rapid.ID[int]).Draw(t, "missing") {
			from[k] = none
		}
		got := e.newRougher().excess(from)
		s := e.unfitted(from, nil)
		if s == nil {
			require.True(t, math.IsInf(got, 1))
			return
		}
		factor := e.level()
		for k, m := range from {
			if m != none {
				s.factor[k] = factor[m]
			}
		}
		s.scale()
		require.InDelta(t, s.excess, got, 1e-6*s.expected)
	})
}

// The basis of a state's checks gives its projector back, of the rank that is left.
func TestBasisIsTheProjectors(t *testing.T) {
	f := newField(t, 31, 12, 10, 8, 3)
	e, err := newEngine(f.expose(f.night(0, 0, 1), 1))
	require.NoError(t, err)
	for missing := range 6 {
		from := append([]int(nil), e.Pairing...)
		for k := range missing {
			from[3*k] = none
		}
		s := e.unfitted(from, nil)
		require.NotNil(t, s)
		l := basis(s.projector, s.freedom)
		var p mat.Dense
		p.Mul(l, l.T())
		require.True(t, mat.EqualApprox(s.projector, &p, 1e-9))
	}
}

// Order statistics are those of the sorted list.
func TestNth(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float32Range(-3, 3), 1, 40).Draw(t, "x")
		if rapid.Bool().Draw(t, "ties") {
			for i := range x {
				x[i] = float32(math.Round(float64(x[i])))
			}
		}
		sorted := append([]float32(nil), x...)
		slices.Sort(sorted)
		n := len(x)
		k := rapid.IntRange(0, n-1).Draw(t, "k")
		require.Equal(t, sorted[k], nth(append([]float32(nil), x...), k))
		low, middle, high := quartiles(append([]float32(nil), x...))
		require.Equal(t, []float32{sorted[n/4], sorted[n/2], sorted[n*3/4]}, []float32{low, middle, high})
		wide := make([]float64, n)
		for i, v := range x {
			wide[i] = float64(v)
		}
		require.Equal(t, (float64(sorted[(n-1)/2])+float64(sorted[n/2]))/2, median(wide))
	})
	// NaN ends no loop badly.
	bad := []float32{1, float32(math.NaN()), 3, float32(math.NaN()), 2}
	rand.New(rand.NewPCG(1, 2)).Shuffle(len(bad), func(i, j int) { bad[i], bad[j] = bad[j], bad[i] })
	quartiles(bad)
}
