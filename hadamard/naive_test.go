package hadamard

import (
	"encoding/csv"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// The naive forms that the fast ones are held against: explicit matrices in
// float64, multiplied out.

func mustCode(t testing.TB, f Family, v int) *Code {
	t.Helper()
	c, err := New(f, v)
	require.NoError(t, err)
	return c
}

// planarCode makes a sparse code from testdata, to test that nothing but the
// families' constructors assumes S-matrices.
func planarCode(t testing.TB, v int) *Code {
	t.Helper()
	for _, r := range readCSV(t, "planar_sets.csv") {
		if atoi(t, r[0]) != v {
			continue
		}
		row := make([]uint8, v)
		for _, s := range strings.Fields(r[3]) {
			row[atoi(t, s)] = 1
		}
		c, err := newCyclic("planar", row)
		require.NoError(t, err)
		require.Equal(t, []int{atoi(t, r[1]), atoi(t, r[2])}, []int{c.K(), c.L()})
		return c
	}
	t.Fatalf("no planar set of %d", v)
	return nil
}

// smallCodes are all codes of the cyclic families up to v = 143, but of complements
// of S-matrices up to 35, sparse ones from testdata and some slit scans.
func smallCodes(t testing.TB) []*Code {
	t.Helper()
	var codes []*Code
	for _, f := range cyclicFamilies() {
		most := 143
		if _, complement := f.Base(); complement && f != SingerComplement {
			most = 35
		}
		for _, v := range Sizes(f) {
			if v <= most {
				codes = append(codes, mustCode(t, f, v))
			}
		}
	}
	for _, v := range []int{11, 57} {
		codes = append(codes, planarCode(t, v))
	}
	for _, v := range []int{1, 2, 9} {
		codes = append(codes, mustCode(t, SlitScan, v))
	}
	return codes
}

func cyclicFamilies() []Family {
	return slices.DeleteFunc(Families(), func(f Family) bool { return f == SlitScan })
}

func matrixOf(c *Code) *mat.Dense {
	w := mat.NewDense(c.V(), c.V(), nil)
	for i := range c.V() {
		for j := range c.V() {
			w.Set(i, j, float64(c.Bit(i, j)))
		}
	}
	return w
}

// inverseOf is A from its two entries.
func inverseOf(c *Code) *mat.Dense {
	open, closed := c.InverseEntries()
	a := mat.NewDense(c.V(), c.V(), nil)
	for i := range c.V() {
		for j := range c.V() {
			if c.Bit(i, j) == 1 {
				a.Set(j, i, open)
			} else {
				a.Set(j, i, closed)
			}
		}
	}
	return a
}

// multiply is the naive m x, x as [row][pixel], in float64.
func multiply(m *mat.Dense, x []float32, pixels, stride int) []float64 {
	n, _ := m.Dims()
	out := make([]float64, n*pixels)
	for i := range n {
		o := out[i*pixels : (i+1)*pixels]
		for j, a := range m.RawRowView(i) {
			for p, b := range x[j*stride : j*stride+pixels] {
				o[p] += a * float64(b)
			}
		}
	}
	return out
}

// readCSV reads a table of testdata without its comments.
func readCSV(t testing.TB, name string) [][]string {
	t.Helper()
	f, err := os.Open(filepath.Join("testdata", name))
	require.NoError(t, err)
	defer func() { _ = f.Close() }()
	r := csv.NewReader(f)
	r.Comment = '#'
	r.FieldsPerRecord = -1
	rows, err := r.ReadAll()
	require.NoError(t, err)
	require.NotEmpty(t, rows)
	return rows
}

func atoi(t testing.TB, s string) int {
	t.Helper()
	n, err := strconv.Atoi(s)
	require.NoError(t, err)
	return n
}

func atof(t testing.TB, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(s, 64)
	require.NoError(t, err)
	return x
}
