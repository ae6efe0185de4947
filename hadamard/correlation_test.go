package hadamard

import (
	"math"
	"math/bits"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// naiveCorrelation is the definition: Ag row by row, its columns' normalised
// inner products.
func naiveCorrelation(c *Code, columns []int) float64 {
	a := inverseOf(c)
	ag := mat.NewDense(len(columns), c.V(), nil)
	for r, j := range columns {
		ag.SetRow(r, a.RawRowView(j))
	}
	worst := 0.0
	for i := range c.V() {
		x := mat.Col(nil, i, ag)
		for other := range i {
			y := mat.Col(nil, other, ag)
			worst = max(worst, math.Abs(floats.Dot(x, y))/(floats.Norm(x, 2)*floats.Norm(y, 2)))
		}
	}
	return worst
}

// TestDarkCorrelationMeetsNaive: sets of every size and order, in transformed,
// bit-counted and sparse codes; not below Welch's bound where that holds.
func TestDarkCorrelationMeetsNaive(t *testing.T) {
	var codes []*Code
	for _, c := range smallCodes(t) {
		if c.Family() != SlitScan && c.V() <= 83 {
			codes = append(codes, c)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		columns := rapid.SliceOfNDistinct(rapid.IntRange(0, c.V()-1), 2, min(c.V()-1, 70), rapid.ID).Draw(t, "columns")
		before := append([]int(nil), columns...)
		got, err := DarkCorrelation(c, columns)
		if err != nil {
			t.Fatal(err)
		}
		want := naiveCorrelation(c, columns)
		if math.Abs(got-want) > 1e-12 {
			t.Fatalf("%s %d, columns %v: %g, naive %g", c.Family(), c.V(), columns, got, want)
		}
		for i := range before {
			if before[i] != columns[i] {
				t.Fatal("the argument was changed")
			}
		}
	})
}

// TestScorersAgree: on m-sequences the transform and the bit counts are the
// same numbers, with one, two and more words of bits.
func TestScorersAgree(t *testing.T) {
	for _, v := range []int{31, 127, 255, 511} {
		c := mustCode(t, MSequence, v)
		for _, g := range []int{2, 5, min(64, v-1), min(65, v-1), min(128, v-1), min(200, v-1)} {
			draw := newDrawer(v, g)
			for trial := range uint64(5) {
				columns := draw.next(9, trial)
				fast := newSpectrumScorer(c).score(columns, math.Inf(1))
				require.Equal(t, newBitScorer(c, g).score(columns, math.Inf(1)), fast)
				require.GreaterOrEqual(t, fast, welch(v, g)-1e-12)
				// Stopped early, the value is not below the limit, nor above the result.
				early := newBitScorer(c, g).score(columns, fast/2)
				require.GreaterOrEqual(t, early, fast/2)
				require.LessOrEqual(t, early, fast)
				require.Equal(t, fast, newBitScorer(c, g).score(columns, math.Nextafter(fast, 2)))
			}
		}
	}
}

// welch is the least coherence of v unit vectors in g dimensions (Welch 1974,
// IEEE Trans. Inf. Theory 20, 397).
func welch(v, g int) float64 {
	return math.Sqrt(float64(v-g) / (float64(g) * float64(v-1)))
}

// TestProductOfColumns: the product of two columns of 1-2W of an m-sequence is
// again a column (shift and add), which is why v numbers hold all
// correlations.
func TestProductOfColumns(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	index := columnIndex(degreeOf(31))
	columnOf := placesOf(index).row
	for j := range 31 {
		for other := range j {
			product := int(columnOf[index[j]^index[other]])
			for i := range 31 {
				require.Equal(t, c.Bit(i, j)^c.Bit(i, other), c.Bit(i, product))
			}
		}
	}
}

func TestDarkCorrelationRefuses(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	for _, columns := range [][]int{{-1}, {31}, {3, 4, 3}} {
		_, err := DarkCorrelation(c, columns)
		require.Error(t, err)
	}
	_, err := DarkCorrelation(mustCode(t, SlitScan, 31), []int{1, 2})
	require.ErrorIs(t, err, ErrNoRedundancy)
	for _, columns := range [][]int{nil, {7}} {
		r, err := DarkCorrelation(c, columns)
		require.NoError(t, err)
		require.Equal(t, 1.0, r)
	}
}

func TestExtremes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		words := rapid.IntRange(1, 4).Draw(t, "words")
		count := rapid.IntRange(1, 9).Draw(t, "count")
		mine := rapid.SliceOfN(rapid.Uint64(), words, words).Draw(t, "mine")
		others := rapid.SliceOfN(rapid.Uint64(), words*count, words*count).Draw(t, "others")
		least, most := extremes(mine, others)
		wantLeast, wantMost := 64*words, 0
		for i := range count {
			n := 0
			for w := range words {
				n += bits.OnesCount64(mine[w] ^ others[i*words+w])
			}
			wantLeast, wantMost = min(wantLeast, n), max(wantMost, n)
		}
		if least != wantLeast || most != wantMost {
			t.Fatalf("%d and %d, want %d and %d", least, most, wantLeast, wantMost)
		}
	})
}
