package hadamard

import (
	"encoding/json"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/internal/outside"
)

// TestFirstRows: published first rows (sources in the file).
func TestFirstRows(t *testing.T) {
	for _, r := range readCSV(t, "first_rows.csv") {
		t.Run(r[0]+"/"+r[1], func(t *testing.T) {
			c := mustCode(t, Family(r[0]), atoi(t, r[1]))
			published := []uint8(r[2])
			for i := range published {
				published[i] -= '0'
			}
			require.Len(t, published, c.V())
			row := c.Row(0)
			switch r[3] {
			case "equal":
				require.Equal(t, published, row)
			case "complement":
				for i := range row {
					row[i] = 1 - row[i]
				}
				require.Equal(t, published, row)
			case "shift":
				require.True(t, isShift(published, row))
			case "reversal":
				slices.Reverse(row)
				require.True(t, isShift(published, row))
			default:
				t.Fatalf("unknown relation %q", r[3])
			}
		})
	}
}

func isShift(a, b []uint8) bool {
	twice := string(append(slices.Clone(a), a...))
	return len(a) == len(b) && strings.Contains(twice, string(b))
}

// TestRowsShiftLeft: row i+1 is row i shifted left by one, and W is symmetric.
func TestRowsShiftLeft(t *testing.T) {
	for _, c := range smallCodes(t) {
		for i := range c.V() {
			row := c.Row(i)
			for j, bit := range row {
				require.Equal(t, c.Bit(i, j), bit)
				require.Equal(t, c.Bit(j, i), bit)
			}
			if c.Family() == SlitScan {
				require.Equal(t, uint8(1), row[i])
				continue
			}
			require.Equal(t, append(slices.Clone(row[1:]), row[0]), c.Row((i+1)%c.V()))
		}
	}
}

// TestDifferenceSets counts k and l of every code to v = 1100 and of the
// largest: every shift of the first row shares l ones with it.
func TestDifferenceSets(t *testing.T) {
	for _, f := range []Family{MSequence, Legendre, TwinPrime} {
		for _, v := range Sizes(f) {
			if v > 1100 && f == Legendre && v != 4091 {
				continue
			}
			c := mustCode(t, f, v)
			require.Equal(t, f, c.Family())
			require.Equal(t, v, c.V())
			require.Equal(t, (v+1)/2, c.K(), "an S-matrix")
			require.Equal(t, (v+1)/4, c.L(), "an S-matrix")
			require.Equal(t, c.K()*(c.K()-1), c.L()*(v-1))
			requireAutocorrelation(t, c)
		}
	}
}

func requireAutocorrelation(t *testing.T, c *Code) {
	t.Helper()
	row, ones := c.Row(0), 0
	for _, bit := range row {
		ones += int(bit)
	}
	require.Equal(t, c.K(), ones)
	twice := append(slices.Clone(row), row...)
	for shift := 1; shift <= len(row)/2; shift++ {
		shared := 0
		for i, bit := range twice[shift : shift+len(row)] {
			shared += int(bit & row[i])
		}
		if shared != c.L() {
			t.Fatalf("%s %d: shift %d shares %d ones, not %d", c.Family(), c.V(), shift, shared, c.L())
		}
	}
}

// TestPolynomials: the table's polynomials, and x has the full order in each.
func TestPolynomials(t *testing.T) {
	rows := readCSV(t, "polynomials.csv")
	require.Len(t, rows, maxDegree-minDegree+1)
	for _, r := range rows {
		degree := atoi(t, r[0])
		bits := uint32(0)
		for _, e := range strings.Fields(r[1]) {
			bits |= 1 << atoi(t, e)
		}
		octal, err := strconv.ParseUint(r[2], 8, 32)
		require.NoError(t, err)
		require.Equal(t, uint32(octal), bits)
		c := mustCode(t, MSequence, 1<<degree-1)
		require.Equal(t, bits, c.Poly())
		for name, index := range map[string][]int{"steps": stepIndex(degree), "columns": columnIndex(degree)} {
			seen := make([]bool, c.V()+1)
			for _, at := range index {
				require.Greater(t, at, 0, name)
				require.LessOrEqual(t, at, c.V(), name)
				require.False(t, seen[at], "%s of degree %d are a bijection", name, degree)
				seen[at] = true
			}
			require.Len(t, index, c.V())
		}
	}
	for _, f := range []Family{Legendre, TwinPrime, SlitScan} {
		require.Zero(t, mustCode(t, f, 15+20*boolInt(f == TwinPrime)-8*boolInt(f == Legendre)).Poly())
	}
}

func boolInt(b bool) int {
	if b {
		return 1
	}
	return 0
}

// TestSizes: the families' sizes (sources in the file).
func TestSizes(t *testing.T) {
	for _, r := range readCSV(t, "sizes.csv") {
		var want, got []int
		for _, s := range strings.Fields(r[1]) {
			want = append(want, atoi(t, s))
		}
		for _, v := range Sizes(Family(r[0])) {
			if v <= 1100 {
				got = append(got, v)
			}
		}
		require.Equal(t, want, got, r[0])
	}
	require.Equal(t, 4095, slices.Max(Sizes(MSequence)))
	require.Equal(t, 4091, slices.Max(Sizes(Legendre)))
	require.Equal(t, []int{15, 35, 143, 323, 899, 1763, 3599}, Sizes(TwinPrime))
	require.Len(t, Sizes(SlitScan), 4095)
	require.Nil(t, Sizes("other"))
}

// TestInverse: W A = I by multiplication, for every small code.
func TestInverse(t *testing.T) {
	for _, c := range smallCodes(t) {
		var product mat.Dense
		product.Mul(matrixOf(c), inverseOf(c))
		for i := range c.V() {
			product.Set(i, i, product.At(i, i)-1)
		}
		require.Less(t, mat.Max(&product)-mat.Min(&product), 1e-13, "%s %d", c.Family(), c.V())
	}
	open, closed := mustCode(t, SlitScan, 5).InverseEntries()
	require.Equal(t, []float64{1, 0}, []float64{open, closed})
	open, closed = mustCode(t, MSequence, 511).InverseEntries()
	require.Equal(t, []float64{2. / 512, -2. / 512}, []float64{open, closed})
}

// TestCrosscheckInverse: the closed-form entries against numpy.linalg.inv of
// the matrix that its first row generates.
func TestCrosscheckInverse(t *testing.T) {
	type entry struct {
		Row          string
		Open, Closed float64
	}
	var args []string
	for _, c := range append(smallCodes(t), mustCode(t, MSequence, 511), mustCode(t, Legendre, 503), mustCode(t, TwinPrime, 323)) {
		if c.Family() == SlitScan {
			continue
		}
		open, closed := c.InverseEntries()
		row := ""
		for _, bit := range c.Row(0) {
			row += strconv.Itoa(int(bit))
		}
		text, err := json.Marshal(entry{row, open, closed})
		require.NoError(t, err)
		args = append(args, string(text))
	}
	out := outside.Python(t, "hadamard_inverse.py", args...)
	var worst float64
	var codes int
	_, err := fmt.Sscan(out, &codes, &worst)
	require.NoError(t, err, out)
	require.Equal(t, len(args), codes)
	t.Logf("%d codes, worst |difference| from numpy.linalg.inv over the largest entry: %.2g", codes, worst)
	require.Less(t, worst, 1e-11)
}

// TestCrosscheckMSequences: every m-sequence is scipy.signal.max_len_seq's with
// the same polynomial, up to shift and reversal.
func TestCrosscheckMSequences(t *testing.T) {
	var args []string
	for _, v := range Sizes(MSequence) {
		args = append(args, strconv.Itoa(int(mustCode(t, MSequence, v).Poly())))
	}
	sequences := strings.Fields(outside.Python(t, "hadamard_mseq.py", args...))
	require.Len(t, sequences, len(args))
	for i, v := range Sizes(MSequence) {
		theirs := []uint8(sequences[i])
		for j := range theirs {
			theirs[j] -= '0'
		}
		ours := mustCode(t, MSequence, v).Row(0)
		same := isShift(theirs, ours)
		slices.Reverse(ours)
		reversed := isShift(theirs, ours)
		require.True(t, same || reversed, "v = %d", v)
		t.Logf("v = %d: shifted %t, reversed %t", v, same, reversed)
	}
}

// TestNoSuchCode: what is refused, and what the message says.
func TestNoSuchCode(t *testing.T) {
	for _, x := range []struct {
		f    Family
		v    int
		text string
	}{
		{MSequence, 512, "no m-sequence code has v = 512: the nearest are 511 and 1023"},
		{MSequence, 1, "no m-sequence code has v = 1: the smallest is 3"},
		{Legendre, 4095, "no legendre code has v = 4095: the largest is 4091"},
		{Legendre, 13, "no legendre code has v = 13: the nearest are 11 and 19"},
		{TwinPrime, 63, "no twin-prime code has v = 63: the nearest are 35 and 143"},
		{Singer, 1023 + 1, "no singer code has v = 1024: the nearest are 1023 and 1057"},
		{LegendreComplement, 3, "no legendre-complement code has v = 3: the smallest is 7"},
		{SlitScan, 0, "no slit-scan code has v = 0: the smallest is 1"},
		{SlitScan, -3, "no slit-scan code has v = -3: the smallest is 1"},
		{SlitScan, 4096, "no slit-scan code has v = 4096: the largest is 4095"},
	} {
		c, err := New(x.f, x.v)
		require.Nil(t, c)
		var no *NoCodeError
		require.ErrorAs(t, err, &no)
		require.EqualError(t, err, x.text)
	}
	_, err := New("walsh", 7)
	require.ErrorIs(t, err, ErrUnknownFamily)
	require.EqualError(t, err, `unknown code family "walsh": use one of m-sequence, legendre, twin-prime, singer, `+
		`m-sequence-complement, legendre-complement, twin-prime-complement, singer-complement, slit-scan`)
	for _, name := range []Family{"slit-scan-complement", "-complement", "singer-complement-complement"} {
		require.Nil(t, Sizes(name))
		_, err := New(name, 7)
		require.ErrorIs(t, err, ErrUnknownFamily)
	}
	for _, f := range Families() {
		parsed, err := ParseFamily(string(f))
		require.NoError(t, err)
		require.Equal(t, f, parsed)
	}
	require.Panics(t, func() { mustCode(t, Legendre, 7).Bit(7, 0) })
	_, err = newCyclic("x", []uint8{1, 1, 0, 0})
	require.Error(t, err)
}
