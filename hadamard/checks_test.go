package hadamard

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"mirrorloom/internal/outside"
)

func mustChecks(t testing.TB, c *Code, dark []int) *Checks {
	t.Helper()
	checks, err := NewChecks(c, dark)
	require.NoError(t, err)
	return checks
}

// outsideCase is a case of testdata/crosscheck/hadamard_checks.py.
type outsideCase struct {
	Row       string
	Dark      []int
	Lost      []int
	Noise     []float64
	Gram      [][]float64
	GramNoise []float64
	Pixels    int
	Prior     [][]float64
}

type outsideResult struct {
	Projector, NoPedestal, NoRows, Decode, Posterior [][]float64
	E                                                []float64
}

func rowsOf(m mat.Matrix) [][]float64 {
	n, _ := m.Dims()
	rows := make([][]float64, n)
	for i := range rows {
		rows[i] = mat.Row(nil, i, m)
	}
	return rows
}

func requireMatrix(t testing.TB, want [][]float64, got mat.Matrix, tolerance float64, what string) {
	t.Helper()
	n, m := got.Dims()
	require.Len(t, want, n, what)
	for i := range n {
		require.Len(t, want[i], m, what)
		for j := range m {
			require.InDelta(t, want[i][j], got.At(i, j), tolerance, "%s (%d, %d)", what, i, j)
		}
	}
}

// TestChecksMeetNumpy: projectors, decodes of unequal and lost rows, and the
// throughput's estimate and posterior, against numpy's pinv, inv and eigh on the
// definitions.
func TestChecksMeetNumpy(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	codes := []*Code{mustCode(t, MSequence, 15), mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), mustCode(t, TwinPrime, 35), planarCode(t, 13), planarCode(t, 21)}
	var cases []outsideCase
	var all []*Checks
	var grams []*Gram
	var priors []*mat.SymDense
	for _, c := range codes {
		v := c.V()
		perm := rng.Perm(v)
		g := v / 3
		dark := slices.Sorted(slices.Values(perm[:g]))
		checks := mustChecks(t, c, dark)
		o := outsideCase{Dark: dark, Lost: perm[g : g+2], Noise: make([]float64, v)}
		var row strings.Builder
		for j := range v {
			row.WriteByte('0' + c.Bit(0, j))
			o.Noise[j] = 0.2 + rng.Float64()
		}
		o.Row = row.String()
		for _, k := range o.Lost {
			o.Noise[k] = -1
		}
		y, s2 := randomBlock(uint64(v), v, 40), randomBlock(uint64(v+1), v, 40)
		for i := range s2 {
			s2[i] = float32(math.Abs(float64(s2[i]))) + 1
		}
		gram, prior := NewGram(v), DefaultThroughputPrior(centredTimes(v), 0.05, 0.3)
		gram.Add(y, s2, 40, 40, 1)
		o.Gram, o.GramNoise, o.Pixels, o.Prior = rowsOf(gram.Sum()), gram.Noise(), gram.Pixels, rowsOf(prior)
		cases, all, grams, priors = append(cases, o), append(all, checks), append(grams, gram), append(priors, prior)
	}
	argument, err := json.Marshal(cases)
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "cases.json")
	require.NoError(t, os.WriteFile(path, argument, 0o600))
	var results []outsideResult
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "hadamard_checks.py", path)), &results))
	require.Len(t, results, len(codes))
	for i, want := range results {
		checks, o := all[i], cases[i]
		requireMatrix(t, want.Projector, checks.Projector(), 1e-11, "P")
		requireMatrix(t, want.NoPedestal, checks.WithoutPedestal().Projector(), 1e-11, "P without pedestal")
		less, err := checks.WithoutRows(o.Lost)
		require.NoError(t, err)
		requireMatrix(t, want.NoRows, less.Projector(), 1e-11, "P without rows")

		noise := slices.Clone(o.Noise)
		for _, k := range o.Lost {
			noise[k] = math.Inf(1)
		}
		r, err := checks.Reweight(noise)
		require.NoError(t, err)
		var full mat.Dense
		full.Mul(r.T, checks.darkRows())
		full.Add(&full, codes[i].inverse())
		lit := 0
		for j, dark := range checks.isDark() {
			if !dark {
				requireMatrix(t, [][]float64{want.Decode[lit]}, full.Slice(j, j+1, 0, codes[i].V()), 1e-10, "decode")
				lit++
			}
		}

		found, err := estimate(checks.equations(grams[i].lightSums()), priors[i])
		require.NoError(t, err)
		for k, e := range want.E {
			require.InDelta(t, e, found.e[k], 1e-7)
		}
		requireMatrix(t, want.Posterior, found.posterior, 1e-9, "posterior")
	}
}

func centredTimes(v int) []float64 {
	times := make([]float64, v)
	for k := range times {
		times[k] = float64(k)/float64(v-1) - 0.5
	}
	return times
}

// TestChecksLaws: P is a projector of rank G that no light passes; without the
// pedestal, no constant; without rows, nothing of them.
func TestChecksLaws(t *testing.T) {
	var codes []*Code
	for _, c := range smallCodes(t) {
		if c.Family() != SlitScan && c.V() >= 7 && c.V() <= 43 {
			codes = append(codes, c)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(codes).Draw(t, "code")
		v := c.V()
		dark := rapid.SliceOfNDistinct(rapid.IntRange(0, v-1), 1, v-1, rapid.ID).Draw(t, "dark")
		lost := rapid.SliceOfNDistinct(rapid.IntRange(0, v-1), 0, 4, rapid.ID).Draw(t, "lost")
		checks, err := NewChecks(c, dark)
		if err != nil {
			t.Fatal(err)
		}
		want := len(dark)
		if rapid.Bool().Draw(t, "pedestal first") {
			checks = checks.WithoutPedestal()
			want--
		}
		checks, err = checks.WithoutRows(lost)
		if err != nil {
			t.Fatal(err)
		}
		if g := checks.G(); g > want || g < want-len(lost) {
			t.Fatalf("%d dark columns, %d rows lost, G = %d", len(dark), len(lost), g)
		}
		p := checks.Projector()
		trace := mat.Trace(p)
		if math.Abs(trace-float64(checks.G())) > 1e-9 {
			t.Fatalf("trace %g, G %d", trace, checks.G())
		}
		var square, light, rest mat.Dense
		square.Mul(p, p)
		light.Mul(p, matrixOf(c))
		isDark := checks.isDark()
		for i := range v {
			sum := 0.0
			for j := range v {
				if math.Abs(square.At(i, j)-p.At(i, j)) > 1e-10 {
					t.Fatal("P is no projector")
				}
				if !isDark[j] && math.Abs(light.At(i, j)) > 1e-9 {
					t.Fatalf("light of column %d passes", j)
				}
				if slices.Contains(lost, i) && p.At(i, j) != 0 {
					t.Fatalf("row %d is lost, P is %g", i, p.At(i, j))
				}
				sum += p.At(i, j)
			}
			if checks.pedestal && math.Abs(sum) > 1e-9 {
				t.Fatal("a pedestal passes")
			}
		}
		if b := checks.Basis(); b != nil {
			rest.Mul(b, b.T())
			for i := range checks.G() {
				for j := range checks.G() {
					if delta := rest.At(i, j); math.Abs(delta-map[bool]float64{true: 1}[i == j]) > 1e-10 && len(lost) == 0 {
						t.Fatalf("basis (%d, %d) %g", i, j, delta)
					}
				}
			}
		}
	})
}

// TestResidual gathers what Rows says, from decoded blocks of any width.
func TestResidual(t *testing.T) {
	for _, c := range []*Code{mustCode(t, MSequence, 31), mustCode(t, Legendre, 23), planarCode(t, 21)} {
		v := c.V()
		base := mustChecks(t, c, []int{1, 4, 5, 9, 12, 17, 20})
		less, err := base.WithoutRows([]int{3, 8})
		require.NoError(t, err)
		for _, checks := range []*Checks{base, base.WithoutPedestal(), less, less.WithoutPedestal()} {
			for _, pixels := range []int{1, lanes, lanes + 5} {
				stride := pixels + 3
				y := randomBlock(7, v, stride)
				decoded := make([]float32, v*stride)
				NewDecoder(c).Decode(decoded, y, pixels, stride)
				dst := make([]float32, 7*stride)
				checks.Residual(dst, decoded, pixels, stride)
				want := multiply(checks.Rows(), y, pixels, stride)
				for i := range 7 {
					for p := range pixels {
						require.InDelta(t, want[i*pixels+p], dst[i*stride+p], 3e-3)
					}
					require.Zero(t, dst[i*stride+pixels], "between the rows")
				}
			}
		}
	}
}

func TestChecksRefuse(t *testing.T) {
	c := mustCode(t, MSequence, 31)
	_, err := NewChecks(mustCode(t, SlitScan, 9), []int{1})
	require.ErrorIs(t, err, ErrNoRedundancy)
	_, err = NewChecks(c, nil)
	require.ErrorIs(t, err, ErrNoChecks)
	for _, dark := range [][]int{{31}, {-1}, {2, 2}} {
		_, err := NewChecks(c, dark)
		require.Error(t, err)
		_, err = mustChecks(t, c, []int{1, 2}).WithoutRows(dark)
		require.Error(t, err)
		_, _, err = mustChecks(t, c, []int{1, 2}).Erasure(dark)
		require.Error(t, err)
	}
}

// TestSplits: every check is judged once, by a fit that has seen none of it, and what was
// projected out stays out; of one check nothing is left to fit.
func TestSplits(t *testing.T) {
	c := mustCode(t, MSequence, 63)
	dark := []int{0, 3, 7, 8, 11, 15, 20, 31, 40, 44, 50, 52, 58, 60, 61, 62}
	require.True(t, mustChecks(t, c, dark).Reliable())
	require.False(t, mustChecks(t, c, dark[:11]).Reliable(), "2 log2 63 = 11.95")
	checks, err := mustChecks(t, c, dark).WithoutPedestal().WithoutRows([]int{5, 17, 40})
	require.NoError(t, err)
	parts := checks.splits()
	require.Len(t, parts, 4)
	total := mat.NewDense(63, 63, nil)
	for _, part := range parts {
		require.Equal(t, 12, part.fit.G()+part.judge.G())
		require.Equal(t, []int{5, 17, 40}, part.fit.Lost())
		var overlap mat.Dense
		overlap.Mul(part.fit.Projector(), part.judge.Projector())
		require.Less(t, mat.Norm(&overlap, 2), 1e-12)
		total.Add(total, part.judge.Projector())
	}
	require.True(t, mat.EqualApprox(total, checks.Projector(), 1e-12))

	var many []int
	for j := range 70 {
		many = append(many, 3*j)
	}
	require.Len(t, mustChecks(t, mustCode(t, MSequence, 255), many).splits(), 2)

	one := mustChecks(t, mustCode(t, MSequence, 31), []int{20}).splits()
	require.Len(t, one, 1)
	require.Equal(t, []int{0, 1}, []int{one[0].fit.G(), one[0].judge.G()})
	chi2, expected, sd := one[0].fit.Chi2(NewGram(31))
	require.Equal(t, []float64{0, 0, 0}, []float64{chi2, expected, sd})
	require.Nil(t, one[0].fit.Basis())
}
