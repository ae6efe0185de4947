package hadamard

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// naiveTransform does the stages h = 1, 2, 4, ... one by one.
func naiveTransform(rows []row) {
	for h := 1; h < len(rows); h *= 2 {
		for i := range rows {
			if i&h != 0 {
				continue
			}
			for p := range lanes {
				a, b := rows[i][p], rows[i+h][p]
				rows[i][p], rows[i+h][p] = a+b, a-b
			}
		}
	}
}

// TestPassesMeetStages: for every size the grouped passes of every level give
// the bits of the single stages, with the mean subtracted first and scale and
// base last, and write nothing around their rows.
func TestPassesMeetStages(t *testing.T) {
	for degree := minDegree; degree <= maxDegree; degree++ {
		c := mustCode(t, MSequence, 1<<degree-1)
		for _, l := range levels() {
			requireStages(t, newTransform(c, l), c.V(), l)
		}
	}
}

func requireStages(t *testing.T, tr *transform, v int, l level) {
	t.Helper()
	rng := rand.New(rand.NewPCG(uint64(v), 3))
	s := tr.scratch.New().(*transformScratch)
	between := make([]row, v+3)
	for i := range between {
		for p := range lanes {
			between[i][p] = float32(rng.NormFloat64())
		}
	}
	before, behind := between[0], between[v+2]
	s.rows = between[1 : v+2]
	for p := range lanes {
		s.mean[p], s.base[p] = float32(rng.NormFloat64()), float32(rng.NormFloat64())
	}
	mean := s.mean
	want := slices.Clone(s.rows)
	for i := range want {
		for p := range lanes {
			want[i][p] -= s.mean[p]
		}
	}
	naiveTransform(want)
	const scale = 0.37
	dst := newGuarded((v-1)*(lanes+1)+lanes, 3)
	tr.run(s, &tr.columns, dst.block, lanes+1, scale)
	dst.requireWhole(t, lanes, lanes+1, l.String())
	require.Equal(t, []row{before, behind, mean}, []row{between[0], between[v+2], s.mean})
	for place := 1; place <= v; place++ {
		got := rowAt(dst.block, int(tr.columns.row[place])*(lanes+1))
		for p := range lanes {
			require.Equal(t, s.base[p]+float32(scale*want[place][p]), got[p], "%s, v = %d place %d", l, v, place)
		}
	}
}

// TestSchedule: the passes cover each stage once, in order.
func TestSchedule(t *testing.T) {
	for degree := minDegree; degree <= maxDegree; degree++ {
		first8, middle, last := schedule(degree)
		h := 1
		if first8 {
			h = 8
		}
		for _, m := range middle {
			require.Equal(t, h, m.h)
			require.Contains(t, []int{4, 8}, m.radix)
			h *= m.radix
		}
		require.Equal(t, h, last.h)
		require.Contains(t, []int{4, 8}, last.radix)
		require.Equal(t, 1<<degree, h*last.radix)
	}
}

// TestGatherSums: rows go to their places, and the sum is taken in the fixed
// order of groups of four.
func TestGatherSums(t *testing.T) {
	for _, l := range levels() {
		for _, v := range []int{3, 7, 31} {
			requireGathered(t, passesOf(l), v, l)
		}
	}
}

func requireGathered(t *testing.T, p passes, v int, l level) {
	t.Helper()
	src := randomBlock(uint64(v), v, lanes+1)
	index := placesOf(stepIndex(degreeOf(v))).index
	rows, sum := make([]row, v+2), row{}
	p.gather(rows[:v+1], &sum, src, index, lanes+1)
	require.Equal(t, [2]row{}, [2]row{rows[0], rows[v+1]}, "%s: place 0 and what is behind", l)
	for p := range lanes {
		at := func(i int) float32 { return src[i*(lanes+1)+p] }
		want, i := float32(0), 0
		for ; i+4 <= v; i += 4 {
			want += (at(i) + at(i+1)) + (at(i+2) + at(i+3))
		}
		for ; i < v; i++ {
			want += at(i)
		}
		require.Equal(t, want, sum[p], l)
		for i := range v {
			require.Equal(t, at(i), rows[index[i]][p], l)
		}
	}
}

// TestResidue: the differences are rounded to float32, their sum is not.
func TestResidue(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 6))
	for _, l := range levels() {
		rows, mean := make([]row, 31), row{}
		for p := range lanes {
			mean[p] = rng.Float32()
			for i := range rows {
				rows[i][p] = 1000 * rng.Float32()
			}
		}
		var got, want [lanes]float64
		passesOf(l).residue(&got, rows, &mean)
		for _, r := range rows {
			for p := range lanes {
				want[p] += float64(r[p] - mean[p])
			}
		}
		require.Equal(t, want, got, l)
	}
}

// TestHadamardBetweenPermutations: 1-2W[i][j] is the Sylvester matrix's entry
// (stepIndex[i], columnIndex[j]), the parity of their common bits.
func TestHadamardBetweenPermutations(t *testing.T) {
	for degree := minDegree; degree <= 9; degree++ {
		c := mustCode(t, MSequence, 1<<degree-1)
		steps, columns := stepIndex(degree), columnIndex(degree)
		for i, u := range steps {
			for j, w := range columns {
				if c.Bit(i, j) != parity(u&w) {
					t.Fatalf("v = %d: bit (%d, %d)", c.V(), i, j)
				}
			}
		}
	}
}

func parity(x int) uint8 {
	p := uint8(0)
	for ; x != 0; x &= x - 1 {
		p ^= 1
	}
	return p
}

// TestCrosscheckSylvester: both transforms, applied to unit vectors, give
// scipy.linalg.hadamard's matrix.
func TestCrosscheckSylvester(t *testing.T) {
	orders := []int{4, 8, 16, 128}
	var args []string
	for _, order := range orders {
		args = append(args, strconv.Itoa(order))
	}
	lines := strings.Fields(outside.Python(t, "hadamard_sylvester.py", args...))
	for _, order := range orders {
		require.GreaterOrEqual(t, len(lines), order)
		requireSylvester(t, lines[:order])
		lines = lines[order:]
	}
	require.Empty(t, lines)
}

func requireSylvester(t *testing.T, lines []string) {
	t.Helper()
	for i, line := range lines {
		require.Len(t, line, len(lines))
		ints, rows := make([]int32, len(lines)), make([]row, len(lines))
		ints[i], rows[i][5] = 1, 1
		transformInts(ints)
		naiveTransform(rows)
		for j, sign := range []byte(line) {
			want := int32(44 - int(sign)) // '+' is 43, '-' is 45
			require.Equal(t, want, ints[j], fmt.Sprint(i, j))
			require.Equal(t, float32(want), rows[j][5], fmt.Sprint(i, j))
		}
	}
}

// TestMeanMatters: without subtracting the pixel's mean the same readings err
// ten times as much or more: the reason for the mean pass. (A shift of the
// readings by an uneven offset spoils the exactness of round test data.)
func TestMeanMatters(t *testing.T) {
	for _, v := range []int{511, 4095} {
		c := mustCode(t, MSequence, v)
		y := decades(v)
		for i := range y {
			y[i] = y[i]/1e5 + 1234.5678
		}
		want := naiveDecode(c, y)
		with, without := make([]float32, v*lanes), make([]float32, v*lanes)
		src := make([]float32, v*lanes)
		for i := range y {
			src[i*lanes] = y[i]
		}
		tr := newTransform(c, pureGo)
		tr.decode(with, src, lanes)
		s := tr.scratch.New().(*transformScratch)
		tr.load(s, &tr.steps, src, lanes)
		s.mean, s.base, s.rows[0] = row{}, row{}, row{}
		tr.run(s, &tr.columns, without, lanes, -2/float32(v+1))
		worst := func(x []float32) float64 {
			e := 0.0
			for j := range want {
				e = max(e, math.Abs(float64(x[j*lanes])-want[j]))
			}
			return e
		}
		t.Logf("v = %d: worst error %.2g with, %.2g without the mean removed", v, worst(with), worst(without))
		require.Greater(t, worst(without), 10*worst(with))
	}
}
