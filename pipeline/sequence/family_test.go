package sequence

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/hadamard"
)

// First rows of S-matrices as published: Harwit and Sloane 1979, Hadamard
// Transform Optics, appendix, quoted in OEIS A217332 (7, 11, 19, 23 are the
// quadratic residues with 0); the m-sequences of x^4+x+1 and x^5+x^2+1 and the
// twin-prime sets were computed with numpy from their definitions and their
// autocorrelation counted.
func TestFirstRows(t *testing.T) {
	for _, c := range []struct {
		family string
		poly   uint32
		want   string
	}{
		{legendre, 0, "1110100"},
		{legendre, 0, "11011100010"},
		{legendre, 0, "1100111101010000110"},
		{legendre, 0, "11111010110011001010000"},
		{legendre, 0, "1110110111100010101110000100100"},
		{mSequence, 0b10011, "000100110101111"},
		{mSequence, 0b100101, "0000100101100111110001101110101"},
		{twinPrime, 0, complement("111011001010000")},
		{twinPrime, 0, complement("11011001010111101100010000011100010")},
	} {
		v := len(c.want)
		rows, err := newCodeRows(c.family, v, c.poly)
		require.NoError(t, err)
		var got []byte
		for _, bit := range rows.first {
			got = append(got, '0'+bit)
		}
		require.Equal(t, c.want, string(got), "%s of %d", c.family, v)
	}
}

func complement(row string) string {
	return strings.NewReplacer("0", "1", "1", "0").Replace(row)
}

// Every row of every code to 4095 columns is that of package hadamard, which
// decodes: the rows here were written without a look at it.
func TestRowsAreThoseOfHadamard(t *testing.T) {
	codes := 0
	require.Len(t, families, len(hadamard.Families()))
	for _, f := range hadamard.Families() {
		require.True(t, isFamily(string(f)))
		var sizes []int
		for v := -1; v <= 2*maxV; v++ {
			if hasSize(string(f), v) {
				sizes = append(sizes, v)
			}
		}
		require.Equal(t, hadamard.Sizes(f), sizes)
		for _, v := range sizes {
			code, err := hadamard.New(f, v)
			require.NoError(t, err)
			rows, err := newCodeRows(string(f), v, code.Poly())
			require.NoError(t, err)
			require.Equal(t, [2]int{code.K(), code.L()}, [2]int{rows.k, rows.l}, "%s of %d", f, v)
			for _, i := range []int{0, 1, v / 3, v / 2, v - 1} {
				if i >= v {
					continue
				}
				row := code.Row(i)
				require.True(t, rows.shows(row, i), "%s of %d, row %d", f, v, i)
				if v > 1 {
					require.False(t, rows.shows(row, (i+1)%v), "%s of %d, row %d", f, v, i)
				}
			}
			codes++
		}
	}
	t.Log(codes, "codes")
}

// The primitive polynomials of degree 5 are the phi(31)/5 = 6 of the tables, in
// octal (Peterson and Weldon 1972, Error-Correcting Codes; from memory).
func TestPrimitivePolynomials(t *testing.T) {
	var primitive []uint32
	for poly := range uint32(128) {
		if mSequenceRow(31, poly) != nil {
			primitive = append(primitive, poly)
		}
	}
	require.Equal(t, []uint32{0o45, 0o51, 0o57, 0o67, 0o73, 0o75}, primitive)
}

func TestSizeAdvice(t *testing.T) {
	for _, c := range []struct {
		family string
		v      int
		want   string
	}{
		{legendre, 127 + 2, "nearest sizes are 127 and 131"},
		{legendre, 1 << 60, "nearest sizes are 4091"},
		{twinPrime, 16, "nearest sizes are 15 and 35"},
		{mSequence, -1 << 60, "nearest sizes are 3"},
		{singer, 1000, "nearest sizes are 993 and 1023"},
		{singer + complementSuffix, 1, "nearest sizes are 7"},
		{slitScan, 0, "nearest sizes are 1"},
	} {
		require.Contains(t, sizeAdvice(c.family, c.v), c.want)
	}
}

// A Singer code's polynomial: of degree 2 over GF(4), that is of degree 6 over GF(2), there
// are phi(63)/6 = 6 primitive ones (21 columns), of degree 3 over GF(3) phi(26)/3 = 4 (13
// columns); each gives a set whose differences are all different.
func TestSingerPolynomials(t *testing.T) {
	for v, want := range map[int]int{21: 6, 13: 4} {
		field, ok := singerFieldOf(v)
		require.True(t, ok)
		found := 0
		for poly := range uint32(200) {
			row := field.row(poly)
			if row == nil {
				continue
			}
			found++
			seen := map[int]bool{}
			for i, a := range row {
				for j, b := range row {
					if i != j && a == 1 && b == 1 {
						require.False(t, seen[(v+i-j)%v])
						seen[(v+i-j)%v] = true
					}
				}
			}
			require.Len(t, seen, v-1)
		}
		require.Equal(t, want, found, v)
	}
	_, err := newCodeRows(singer, 13, 35)
	require.ErrorContains(t, err, "no primitive polynomial of degree 3 over GF(3)")
	_, err = newCodeRows(singer+complementSuffix, 13, 0)
	require.Error(t, err)
	require.False(t, hasSize(slitScan+complementSuffix, 7))
}
