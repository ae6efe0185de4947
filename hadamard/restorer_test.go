package hadamard

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// restorerCase is a code with dark columns and rows that are missing.
func restorerCase(t *rapid.T) (c *Code, checks *Checks, dark, rows []int) {
	family := rapid.SampledFrom([]Family{MSequence, Legendre, TwinPrime}).Draw(t, "family")
	v := map[Family]int{MSequence: 31, Legendre: 43, TwinPrime: 35}[family]
	c, err := New(family, v)
	require.NoError(t, err)
	draw := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
	dark = draw.Perm(v)[:rapid.IntRange(8, 12).Draw(t, "dark")]
	slices.Sort(dark)
	rows = draw.Perm(v)[:rapid.IntRange(1, 3).Draw(t, "missing")]
	slices.Sort(rows)
	checks, err = NewChecks(c, dark)
	require.NoError(t, err)
	if rapid.Bool().Draw(t, "pedestal") {
		checks = checks.WithoutPedestal()
	}
	return c, checks, dark, rows
}

// Whatever stands in the missing rows, what is restored is what the light would have
// given; with a pedestal as well where the checks are blind to it. Restoring all pixels
// alike gives the same.
func TestRestorerIsExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, checks, dark, rows := restorerCase(t)
		r := checks.NewRestorer()
		pedestal := 0.0
		if checks.pedestal {
			pedestal = 30
		}
		y, want := make([]float64, c.V()), make([]float64, c.V())
		light := make([]float64, c.V())
		for j := range light {
			if !slices.Contains(dark, j) {
				light[j] = float64((j*37)%11) + 1
			}
		}
		for i := range y {
			for j, f := range light {
				want[i] += float64(c.Bit(i, j)) * f
			}
			want[i] += pedestal
			y[i] = want[i]
		}
		for _, k := range rows {
			y[k] = 1000 - 7*float64(k)
		}
		var repair Repair
		residual := residualOf(c, dark, y)
		if !r.Solve(&repair, rows, residual) {
			t.Skip("dependent marks")
		}
		for a, k := range rows {
			require.InDelta(t, want[k], y[k]+repair.Missing[a], 1e-7)
		}
		lost, err := r.Lost(rows, slices.Repeat([]float64{1}, c.V()))
		require.NoError(t, err)
		require.InEpsilon(t, lost.Growth, repair.Growth, 3/float64(c.V())+0.1*(repair.Growth-1))
		decoded, missing := make([]float32, c.V()), make([]float32, len(rows))
		for j := range decoded {
			decoded[j] = float32(residualOf(c, []int{j}, y)[0])
		}
		lost.Apply(decoded, missing, 1, 1)
		for j, f := range light {
			require.InDelta(t, f+pedestal/float64(c.K()), decoded[j], 1e-3)
		}
	})
}

// residualOf decodes some columns.
func residualOf(c *Code, columns []int, y []float64) []float64 {
	a, b := c.InverseEntries()
	out := make([]float64, len(columns))
	for i, j := range columns {
		for k, x := range y {
			if c.Bit(k, j) == 1 {
				out[i] += a * x
			} else {
				out[i] += b * x
			}
		}
	}
	return out
}

// Ratio, Growth and DarkShare are the variances of the restored decode, found here by
// decoding unit readings one by one.
func TestLostRowsForeseeTheNoise(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, checks, dark, rows := restorerCase(t)
		v, g := c.V(), len(dark)
		noise := make([]float64, v)
		for i := range noise {
			noise[i] = 1 + float64(i%3)/2
		}
		lost, err := checks.NewRestorer().Lost(rows, noise)
		if err != nil {
			t.Skip("dependent marks")
		}
		variance, plain, square := make([]float64, v), make([]float64, v), 0.0
		total := 0.0
		for i := range v {
			if slices.Contains(rows, i) {
				continue
			}
			total += noise[i]
			unit := make([]float64, v)
			unit[i] = 1
			decoded, missing := make([]float32, v), make([]float32, len(rows))
			for j := range decoded {
				decoded[j] = float32(residualOf(c, []int{j}, unit)[0])
				plain[j] += float64(decoded[j]*decoded[j]) * noise[i]
			}
			lost.Apply(decoded, missing, 1, 1)
			mean := 0.0
			for j, x := range decoded {
				variance[j] += float64(x*x) * noise[i]
				if checks.pedestal && slices.Contains(dark, j) {
					mean += float64(x) / float64(g)
				}
			}
			for _, j := range dark {
				x := float64(decoded[j]) - mean
				square += x * x * noise[i]
			}
		}
		mean := 0.0
		for j := range v {
			if slices.Contains(dark, j) {
				continue
			}
			mean += variance[j] / float64(v-g)
			require.InEpsilon(t, variance[j]/plain[j], lost.Ratio[j], 1e-4)
		}
		complete := c.Design().ReadNoiseVariance() * total / float64(v-len(rows))
		require.InEpsilon(t, mean/complete, lost.Growth, 1e-4)
		require.InEpsilon(t, square/(float64(g)*mean), lost.DarkShare, 1e-4)
	})
}

// Rows whose marks are dependent are refused: as many as there are checks and more, and
// a set that a search finds.
func TestRestorerRefusesDependentRows(t *testing.T) {
	c, err := New(MSequence, 31)
	require.NoError(t, err)
	dark, err := ChooseDark(t.Context(), c, 8, 1)
	require.NoError(t, err)
	checks, err := NewChecks(c, dark.Columns)
	require.NoError(t, err)
	r := checks.NewRestorer()
	many := make([]int, 9)
	for i := range many {
		many[i] = i
	}
	var repair Repair
	require.False(t, r.Solve(&repair, many, make([]float64, 8)))
	_, err = r.Lost(many, slices.Repeat([]float64{1}, 31))
	require.ErrorContains(t, err, "9 lost code rows leave dependent marks on the 8 dark columns")
	draw := rand.New(rand.NewPCG(3, 3))
	refused := 0
	for range 200 {
		rows := draw.Perm(31)[:6]
		marks := mat.NewDense(8, 6, nil)
		for i, j := range dark.Columns {
			for a, k := range rows {
				marks.Set(i, a, 2*float64(c.Bit(k, j))-1)
			}
		}
		var svd mat.SVD
		require.True(t, svd.Factorize(marks, mat.SVDNone))
		dependent := svd.Values(nil)[5] < 1e-9
		require.Equal(t, !dependent, r.Solve(&repair, rows, make([]float64, 8)), "%v", rows)
		if dependent {
			refused++
		}
	}
	require.Positive(t, refused)
	require.Less(t, refused, 200)
}

// Project is P y.
func TestRestorerProjects(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c, checks, dark, _ := restorerCase(t)
		y := make([]float64, c.V())
		for i := range y {
			y[i] = math.Sin(float64(3 * i))
		}
		got := make([]float64, c.V())
		checks.NewRestorer().Project(got, residualOf(c, dark, y))
		p := checks.Projector()
		for i := range got {
			want := 0.0
			for k, x := range y {
				want += p.At(i, k) * x
			}
			require.InDelta(t, want, got[i], 1e-9)
		}
	})
}

// A pixel costs no allocation once its kind was seen.
func TestRestorerAllocatesNothing(t *testing.T) {
	c, err := New(MSequence, 63)
	require.NoError(t, err)
	dark, err := ChooseDark(t.Context(), c, 16, 1)
	require.NoError(t, err)
	checks, err := NewChecks(c, dark.Columns)
	require.NoError(t, err)
	r := checks.NewRestorer()
	var repair Repair
	residual := make([]float64, 16)
	require.Zero(t, testing.AllocsPerRun(10, func() { r.Solve(&repair, []int{3, 9, 40}, residual) }))
}

// TestSpread: what restoring rows adds to the variance of lit columns is, to rows/v
// of the whole, the difference of the rows of A + A_K e Ag and of A, squared and added up, in the
// rows that are not lost, where lost ones count as if they had been read.
func TestSpread(t *testing.T) {
	for _, x := range []struct {
		c *Code
		g int
	}{{mustCode(t, MSequence, 63), 16}, {mustCode(t, Singer, 73), 26}, {mustCode(t, SingerComplement, 73), 26}} {
		set, err := ChooseDark(t.Context(), x.c, x.g, 3)
		require.NoError(t, err)
		checks, err := NewChecks(x.c, set.Columns)
		require.NoError(t, err)
		v, rows := x.c.V(), []int{3, 20, 41}
		r := checks.NewRestorer()
		var solved Repair
		require.True(t, r.Solve(&solved, rows, make([]float64, x.g)))
		spread := make([]float64, v)
		r.Spread(spread, rows, &solved)
		even := make([]float64, v)
		for i := range even {
			even[i] = 1
		}
		lost, err := r.Lost(rows, even)
		require.NoError(t, err)
		require.Equal(t, spread, lost.Spread)
		variance := x.c.Design().ReadNoiseVariance()
		growth, lit := 0.0, 0.0
		for j := range v {
			if slices.Contains(set.Columns, j) {
				require.Zero(t, spread[j])
				continue
			}
			plain := 0.0 // of the rows at hand
			for k := range v {
				if !slices.Contains(rows, k) {
					plain += inverseOf(x.c).At(j, k) * inverseOf(x.c).At(j, k)
				}
			}
			require.InDelta(t, lost.Ratio[j]*plain, variance+spread[j], 5*variance/float64(v), "%s column %d", x.c.Family(), j)
			growth, lit = growth+spread[j]/variance, lit+1
		}
		require.InDelta(t, lost.Growth, 1+growth/lit, 5/float64(v))
	}
}

// TestSparseDark: a step of a sparse code opens few dark columns, g k/v of them in the mean.
// With five the chosen set tells any two steps apart, with two or three some steps open
// none and leave the same mark, which Correlation says.
func TestSparseDark(t *testing.T) {
	for _, x := range []struct {
		v, g  int
		tells bool
	}{{73, 40, true}, {85, 20, true}, {121, 16, true}, {57, 16, false}, {73, 16, false}} {
		c := mustCode(t, Singer, x.v)
		set, err := ChooseDark(t.Context(), c, x.g, 1)
		require.NoError(t, err)
		t.Logf("singer %d: %d dark columns, correlation %.3f", x.v, x.g, set.Correlation)
		require.Equal(t, x.tells, set.Correlation < 0.999, "%d of %d", x.g, x.v)
	}
}
