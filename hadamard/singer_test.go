package hadamard

import (
	"math"
	"math/bits"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/stat/distuv"
)

// TestParameters: W'W = (k-l)I + lJ and AW = I, multiplied out from W's bits and A's two
// entries, for every parameter set of the table (sources in the file).
func TestParameters(t *testing.T) {
	sets := 0
	for _, r := range readCSV(t, "parameters.csv") {
		c := mustCode(t, Family(r[0]), atoi(t, r[1]))
		require.Equal(t, []int{atoi(t, r[2]), atoi(t, r[3])}, []int{c.K(), c.L()}, r)
		require.Equal(t, c.K()*(c.K()-1), c.L()*(c.V()-1))
		requireInverse(t, c)
		sets++
	}
	require.Equal(t, 239, sets)
}

func requireInverse(t *testing.T, c *Code) {
	t.Helper()
	v, words := c.V(), (c.V()+63)/64
	columns := make([]uint64, v*words)
	for j := range v {
		for i := range v {
			columns[j*words+i/64] |= uint64(c.Bit(i, j)) << (i % 64)
		}
	}
	open, closed := c.InverseEntries()
	worst := 0.0
	for j := range v {
		mine := columns[j*words : (j+1)*words]
		for other := range j + 1 {
			shared, theirs := 0, 0
			for w, x := range columns[other*words : (other+1)*words] {
				shared += bits.OnesCount64(x & mine[w])
				theirs += bits.OnesCount64(x)
			}
			want, product := c.L(), open*float64(shared)+closed*float64(theirs-shared)
			if j == other {
				want, product = c.K(), product-1
			}
			if shared != want {
				t.Fatalf("%s %d: columns %d and %d share %d ones, not %d", c.Family(), v, j, other, shared, want)
			}
			worst = max(worst, math.Abs(product))
		}
	}
	require.Less(t, worst, 1e-12, "%s %d", c.Family(), v)
}

// TestSingerDesigns: every prime power q and dimension d >= 2 up to 4095 columns has its
// design, of the largest q where two have one v; p is a multiplier of the set.
func TestSingerDesigns(t *testing.T) {
	want := map[int][2]int{} // k, l by v; q descending, so that the first is kept
	for q := 63; q >= 2; q-- {
		if len(primeFactors(q)) != 1 {
			continue
		}
		for v, d := q*q+q+1, 2; v <= MaxV; v, d = v*q+1, d+1 {
			if _, has := want[v]; !has {
				want[v] = [2]int{(v - 1) / q, ((v-1)/q - 1) / q}
			} else {
				require.Equal(t, []int{31, 2, 4}, []int{v, q, d}, "the one size that two designs have")
			}
		}
	}
	require.Len(t, Sizes(Singer), len(want))
	require.IsIncreasing(t, Sizes(Singer))
	for _, v := range Sizes(Singer) {
		c := mustCode(t, Singer, v)
		require.Equal(t, want[v], [2]int{c.K(), c.L()}, v)
		requireAutocorrelation(t, c)
		first, p := c.Row(0), singerOf(v).p
		for i, bit := range first {
			require.Equal(t, bit, first[i*p%v], "%d: member %d times %d", v, i, p)
		}
		other := mustCode(t, SingerComplement, v)
		require.Equal(t, []int{v, v - c.K(), v - 2*c.K() + c.L()}, []int{v, other.K(), other.L()})
		require.Equal(t, c.Poly(), other.Poly())
		for i, bit := range other.Row(0) {
			require.Equal(t, 1-bit, first[i])
		}
	}
	require.Equal(t, 4095, slices.Max(Sizes(Singer)))
}

// TestPublishedSets: explicit sets, up to a shift and a multiplier (sources in the file).
func TestPublishedSets(t *testing.T) {
	for _, r := range readCSV(t, "planar_sets.csv") {
		v, published := atoi(t, r[0]), []int{}
		for _, s := range strings.Fields(r[3]) {
			published = append(published, atoi(t, s))
		}
		family := Singer
		if v == 11 {
			family = LegendreComplement
		}
		c := mustCode(t, family, v)
		require.Equal(t, []int{atoi(t, r[1]), atoi(t, r[2])}, []int{c.K(), c.L()})
		require.True(t, isEquivalent(published, c.Row(0)), "%d", v)
		published[len(published)-1]++
		require.False(t, isEquivalent(published, c.Row(0)), "%d, one member moved", v)
	}
}

// isEquivalent tells whether some multiple of the set, shifted, is where row has ones.
func isEquivalent(set []int, row []uint8) bool {
	v := len(row)
	for factor := 1; factor < v; factor++ {
		moved := make([]uint8, v)
		for _, s := range set {
			moved[s*factor%v] = 1
		}
		if isShift(moved, row) {
			return true
		}
	}
	return false
}

// TestSparseGain: a flat scene of 820 elements under affine noise s0^2 + k eta^2 with q =
// eta^2/s0^2 = 0.1 gains 2.972 over the slit scan with (820,91,10), where an ideal design of
// 1023 columns would gain 3.008 and an S-matrix of 1023 gains 2.324 (computed with numpy, the
// reference that the three figures come from gives three decimals). The measured gain is
// that of 2000 nights of 820 elements each, Poisson light and Gaussian read noise, through
// Decode: N = 1.64 million decoded values on each side, of which those of a night are nearly
// independent (correlations of order l/k^2 = 1e-3); the standard errors are over nights.
// The variances that Variance quotes from the readings' own expectation are the scatter's.
func TestSparseGain(t *testing.T) {
	const nights, photons, read = 2000, 100., 1000. // q = 100/1000
	c := mustCode(t, Singer, 820)
	flat := func(v int) Exposure {
		return Exposure{Element: photons, Total: photons * float64(v), ReadVariance: read}
	}
	theory := c.Design().Gain(flat(820), 820)
	require.InDelta(t, 2.972, theory, 0.0005)
	require.InDelta(t, 2.324, Design{1023, 512, 256}.Gain(flat(1023), 1023), 0.0005)
	// The bound's own k need not be whole: (1/k^2 + (v-1)^2/(k(v-k)))/v, Ratner et al. 2007.
	v, k := 1023., 92.
	bound := (1/(k*k) + (v-1)*(v-1)/(k*(v-k))) / v
	require.InDelta(t, 3.008, math.Sqrt(1.1/((1+0.1*k)*bound)), 0.0005)

	code, codeError, quoted := measuredVariance(c, nights, photons, read, 5)
	slit, slitError, _ := measuredVariance(mustCode(t, SlitScan, 820), nights, photons, read, 6)
	gain := math.Sqrt(slit / code)
	gainError := gain / 2 * math.Hypot(codeError/code, slitError/slit)
	t.Logf("gain %.4f +- %.4f, theory %.4f; variance over quoted %.4f +- %.4f", gain, gainError, theory, code/quoted, codeError/quoted)
	require.InDelta(t, theory, gain, max(0.01, 5*gainError))
	require.Less(t, 5*gainError, 0.05)
	require.InDelta(t, 1, code/quoted, max(0.003, 5*codeError/quoted))
	require.InEpsilon(t, c.Design().Variance(flat(820)), quoted, 1e-6)
}

// measuredVariance is the mean square of decoded less true of a flat scene, its standard
// error over the nights, and the variance that Variance quotes.
func measuredVariance(c *Code, nights int, photons, read float64, seed uint64) (variance, standardError, quoted float64) {
	v, d := c.V(), NewDecoder(c)
	rng := rand.New(rand.NewPCG(303, seed))
	light := distuv.Poisson{Lambda: photons * float64(c.K()), Src: rng}
	y, x, s2 := make([]float32, v*nights), make([]float32, v*nights), make([]float32, v)
	for i := range y {
		y[i] = float32(light.Rand() + math.Sqrt(read)*rng.NormFloat64())
	}
	d.Decode(x, y, nights, nights)
	squares := make([]float64, nights)
	for i, got := range x {
		squares[i%nights] += (float64(got) - photons) * (float64(got) - photons) / float64(v)
	}
	for i := range s2 {
		s2[i] = float32(light.Lambda + read)
	}
	d.Variance(x, s2, 1, 1, 0)
	variance, spread := 0.0, 0.0
	for _, s := range squares {
		variance += s / float64(nights)
	}
	for _, s := range squares {
		spread += (s - variance) * (s - variance) / float64(nights-1)
	}
	return variance, math.Sqrt(spread / float64(nights)), float64(x[0])
}
