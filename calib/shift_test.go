package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// block makes rows x columns values and slices them by rows.
func block(rows, columns int, at func(x, y int) float64) [][]float32 {
	out := make([][]float32, rows)
	for y := range out {
		out[y] = make([]float32, columns)
		for x := range out[y] {
			out[y][x] = float32(at(x, y))
		}
	}
	return out
}

func newShift(t testing.TB, rows int, shift ...float64) *RowShift {
	t.Helper()
	s, err := NewRowShift(shift, rows)
	require.NoError(t, err)
	return s
}

// spanOf hands over no more than Span promises.
func spanOf[T any](s *RowShift, rows []T, y0 int) (part []T, first int) {
	first, last := s.Span(y0)
	return rows[first : last+1], first
}

// A star of FWHM 3 px across the traces, at every shift: error against erf below
// 0.15 % of its peak, as along x.
func TestRowShiftStar(t *testing.T) {
	const rows, columns = 48, 41
	shift := make([]float64, columns)
	for x := range shift {
		shift[x] = -4 + 0.2*float64(x) + 0.013
	}
	s := newShift(t, rows, shift...)
	worst := 0.0
	peak := math.Erf(0.5 * fwhmPerSigma / 3 / math.Sqrt2)
	for i := range 20 {
		centre := 22 + float64(i)/20
		data := block(rows, columns, func(x, y int) float64 {
			return gaussianBelow(float64(y)+0.5, centre, 3) - gaussianBelow(float64(y)-0.5, centre, 3)
		})
		out := make([]float32, columns)
		for y0 := 8; y0 < rows-8; y0++ {
			part, first := spanOf(s, data, y0)
			s.Signal(out, part, first, y0)
			for x, got := range out {
				y := float64(y0) + shift[x]
				want := gaussianBelow(y+0.5, centre, 3) - gaussianBelow(y-0.5, centre, 3)
				worst = max(worst, math.Abs(float64(got)-want)/peak)
			}
		}
	}
	t.Logf("star of FWHM 3 px: worst error %.4f %% of the peak", 100*worst)
	require.Less(t, worst, 0.0015)
}

// No shift and whole shifts only copy rows.
func TestRowShiftWholeRows(t *testing.T) {
	data := block(20, 3, func(x, y int) float64 { return float64(y*y + 1000*x) })
	s := newShift(t, 20, 0, 2, -3)
	out, variance := make([]float32, 3), make([]float32, 3)
	for y0 := 3; y0 < 18; y0++ {
		part, first := spanOf(s, data, y0)
		s.Signal(out, part, first, y0)
		s.Variance(variance, part, first, y0)
		want := []float32{data[y0][0], data[y0+2][1], data[y0-3][2]}
		require.InDeltaSlice(t, want, out, 1e-3)
		require.InDeltaSlice(t, want, variance, 1e-3)
	}
}

// A slope along the column stays one, up to the ends where the trace is covered.
func TestRowShiftKeepsSlopes(t *testing.T) {
	const rows = 24
	shift := []float64{-1.3, -0.5, 0, 0.25, 0.5, 1.7}
	s := newShift(t, rows, shift...)
	data := block(rows, len(shift), func(x, y int) float64 { return 50 + 3*float64(y) })
	flags := make([][]Flag, rows)
	for y := range flags {
		flags[y] = make([]Flag, len(shift))
	}
	out := make([]float32, len(shift))
	var f RowFlags
	for y0 := range rows {
		part, first := spanOf(s, data, y0)
		s.Signal(out, part, first, y0)
		bits, first := spanOf(s, flags, y0)
		s.Flags(&f, bits, first, y0)
		for x, got := range out {
			low, high := float64(y0)-0.5+shift[x], float64(y0)+0.5+shift[x]
			cover := min(high, rows-0.5) - max(low, -0.5)
			switch {
			case cover < 0.5:
				require.Equal(t, NoData|Partial, f.Bits[x], "row %d column %d", y0, x)
			case cover < 0.99:
				require.Equal(t, Partial, f.Bits[x], "row %d column %d", y0, x)
			default:
				require.Zero(t, f.Bits[x])
				require.InDelta(t, 50+3*(float64(y0)+shift[x]), got, 1e-3, "row %d column %d", y0, x)
			}
		}
	}
}

// All trace rows together hold the light of all detector rows.
func TestRowShiftConservesFlux(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const rows = 40
		tShift := rapid.Float64Range(-8, 8).Draw(t, "shift")
		s, err := NewRowShift([]float64{tShift}, rows)
		require.NoError(t, err)
		data := block(rows, 1, func(int, int) float64 { return 0 })
		total, size := 0.0, 0.0
		for y := 13; y < rows-13; y++ {
			data[y][0] = float32(rapid.Float64Range(-100, 1000).Draw(t, "value"))
			total += float64(data[y][0])
			size += math.Abs(float64(data[y][0]))
		}
		sum, out := 0.0, make([]float32, 1)
		for y0 := range rows {
			s.Signal(out, data, 0, y0)
			sum += float64(out[0])
		}
		require.InDelta(t, total, sum, 1e-6*size)
	})
}

// Variance against N independent noise columns.
func TestRowShiftVarianceMonteCarlo(t *testing.T) {
	const rows, n = 16, 20000
	shift := make([]float64, n)
	for x := range shift {
		shift[x] = 0.37
	}
	s := newShift(t, rows, shift...)
	rng := rand.New(rand.NewPCG(7, 9))
	data := block(rows, n, func(x, y int) float64 { return rng.NormFloat64() * math.Sqrt(1+float64(y)) })
	variances := block(rows, n, func(x, y int) float64 { return 1 + float64(y) })
	out, variance := make([]float32, n), make([]float32, n)
	for y0 := range rows {
		s.Signal(out, data, 0, y0)
		s.Variance(variance, variances, 0, y0)
		sum := 0.0
		for _, v := range out {
			sum += float64(v) * float64(v)
		}
		require.InDelta(t, 1, sum/n/float64(variance[0]), 5*math.Sqrt(2.0/n), "row %d", y0)
	}
}

func TestRowShiftFlags(t *testing.T) {
	const rows = 24
	s := newShift(t, rows, 0.5, 0.5, 0.1)
	flags := make([][]Flag, rows)
	for y := range flags {
		flags[y] = make([]Flag, 3)
		flags[y][1] = BadPixel // a bad column
	}
	flags[12][0] = Saturated
	flags[12][2] = LowFlat
	unit := block(rows, 3, func(x, y int) float64 {
		if y == 12 {
			return 1
		}
		return 0
	})
	var f RowFlags
	weight := make([]float32, 3)
	for y0 := 6; y0 < 18; y0++ {
		s.Flags(&f, flags, 0, y0)
		s.Signal(weight, unit, 0, y0)
		for x, bit := range map[int]Flag{0: Saturated, 2: LowFlat} {
			w := math.Abs(float64(weight[x]))
			require.Equal(t, w > 0.1, f.Bits[x] == bit, "row %d", y0)
			if w > 0.1 {
				require.InDelta(t, w, f.Reach[x], 1e-6)
			} else {
				require.Zero(t, f.Reach[x])
			}
		}
		require.Equal(t, BadPixel, f.Bits[1])
		require.InDelta(t, 1, f.Reach[1], 1e-6, "a bad column reaches whole")
	}
}

func TestNewRowShiftRefuses(t *testing.T) {
	_, err := NewRowShift([]float64{0}, 7)
	require.ErrorContains(t, err, "7 rows")
	_, err = NewRowShift([]float64{0, math.NaN()}, 20)
	require.ErrorContains(t, err, "column 1")
}

func BenchmarkRowShift(b *testing.B) {
	const columns, rows = 640, 32
	shift := make([]float64, columns)
	for x := range shift {
		shift[x] = 3 * (float64(x)/columns - 0.5)
	}
	s := newShift(b, rows, shift...)
	data := block(rows, columns, func(x, y int) float64 { return float64(x ^ y) })
	out := make([]float32, columns)
	b.SetBytes(columns * 4)
	b.ReportAllocs()
	for b.Loop() {
		s.Signal(out, data, 0, 15)
		s.Variance(out, data, 0, 15)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/columns, "ns/pixel")
}
