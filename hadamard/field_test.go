package hadamard

import (
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
)

// elements lists all of a small field.
func elements(f *field) [][]int {
	return append([][]int{make([]int, f.degree)}, f.powers()...)
}

// TestFieldLaws: the laws of a field, exhaustively in small ones: every pair commutes
// and distributes over every third, every element but 0 has one inverse, and
// adding to the power of p is linear (Frobenius).
func TestFieldLaws(t *testing.T) {
	for _, x := range [][2]int{{2, 1}, {2, 3}, {2, 4}, {3, 2}, {3, 3}, {5, 2}, {7, 1}} {
		f := newField(x[0], x[1])
		all := elements(f)
		seen := map[string]bool{}
		for _, a := range all {
			seen[string(digits(a))] = true
			inverses := 0
			for _, b := range all {
				product := f.times(a, b)
				require.Equal(t, product, f.times(b, a))
				if f.isOne(product) {
					inverses++
				}
				sum := slices.Clone(a)
				f.add(sum, b)
				frobenius := f.raised(a)
				f.add(frobenius, f.raised(b))
				require.Equal(t, f.raised(sum), frobenius)
				for _, c := range all {
					left, right := f.times(sum, c), f.times(a, c)
					f.add(right, f.times(b, c))
					require.Equal(t, left, right)
				}
			}
			want := 1
			if slices.Max(a) == 0 {
				want = 0
			}
			require.Equal(t, want, inverses)
		}
		require.Len(t, seen, power(x[0], x[1]), "the powers of x are all elements but 0")
	}
}

// raised is a^p.
func (f *field) raised(a []int) []int {
	out := f.one()
	for range f.p {
		out = f.times(out, a)
	}
	return out
}

func digits(a []int) []byte {
	out := make([]byte, len(a))
	for i, x := range a {
		out[i] = byte(x)
	}
	return out
}

// TestFirstPrimitive: over GF(2) the first primitive polynomials are the table's, but for
// degrees where the table has another one first; over GF(3) those that are worked out by
// hand: x-2 has the generator 2, of x^2+1, x^2+x+1, x^2+2 and x^2+2x+1 none is primitive
// and x^2+x+2 is.
func TestFirstPrimitive(t *testing.T) {
	for _, degree := range []int{2, 3, 4, 5, 6, 7, 9, 10, 11} {
		f := newField(2, degree)
		require.LessOrEqual(t, f.polynomialNumber(), primitive[degree])
		table := &field{p: 2, degree: degree, lower: make([]int, degree)}
		for bit := range degree {
			table.lower[bit] = int(primitive[degree]>>bit) & 1
		}
		require.True(t, table.isPrimitive())
	}
	require.Equal(t, uint32(3+1), newField(3, 1).polynomialNumber())
	require.Equal(t, uint32(9+3+2), newField(3, 2).polynomialNumber())
	require.Equal(t, []int{2, 3, 5}, primeFactors(360))
	require.Equal(t, []int{97}, primeFactors(97))
	require.Empty(t, primeFactors(1))
}
