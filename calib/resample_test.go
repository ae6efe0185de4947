package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// gaussianBelow is the light of a unit Gaussian line left of x.
func gaussianBelow(x, centre, fwhm float64) float64 {
	return math.Erfc((centre-x)/(fwhm/fwhmPerSigma)/math.Sqrt2) / 2
}

// gaussianRow integrates a unit Gaussian line over each pixel.
func gaussianRow(columns int, centre, fwhm float64) []float32 {
	row := make([]float32, columns)
	for x := range row {
		row[x] = float32(gaussianBelow(float64(x)+0.5, centre, fwhm) - gaussianBelow(float64(x)-0.5, centre, fwhm))
	}
	return row
}

func evenEdges(first, step float64, count int) []float64 {
	edges := make([]float64, count)
	for i := range edges {
		edges[i] = first + step*float64(i)
	}
	return edges
}

func newVoxels(n int) Voxels {
	return Voxels{Signal: make([]float32, n), Variance: make([]float32, n), Flags: make([]Flag, n), Stride: 1}
}

func newResampler(t testing.TB, columns int) *Resampler {
	t.Helper()
	r, err := NewResampler(0, columns-1)
	require.NoError(t, err)
	return r
}

// Light is conserved: voxels that tile an inner range hold what the row holds, if
// its ends are dark; and any two tilings of one range agree.
func TestResampleConservesFlux(t *testing.T) {
	const columns = 80
	r := newResampler(t, columns)
	rapid.Check(t, func(t *rapid.T) {
		row := make([]float32, columns)
		total, size := 0.0, 0.0
		for x := 10; x < columns-10; x++ {
			row[x] = float32(rapid.Float64Range(-100, 1000).Draw(t, "value"))
			total += float64(row[x])
			size += math.Abs(float64(row[x]))
		}
		edges := []float64{rapid.Float64Range(0, 3).Draw(t, "start")}
		for edges[len(edges)-1] < columns-5 {
			edges = append(edges, edges[len(edges)-1]+rapid.Float64Range(0.3, 11).Draw(t, "width"))
		}
		if rapid.Bool().Draw(t, "falling") {
			for i, j := 0, len(edges)-1; i < j; i, j = i+1, j-1 {
				edges[i], edges[j] = edges[j], edges[i]
			}
		}
		v := newVoxels(len(edges) - 1)
		r.Resample(v, row, make([]float32, columns), nil, edges)
		sum := 0.0
		for i, s := range v.Signal {
			if v.Flags[i]&NoData == 0 {
				sum += float64(s)
			}
		}
		require.InDelta(t, total, sum, 1e-6*size)
	})
}

// Reference page on resampling, identity 2: a constant density stays constant;
// this interpolant keeps a slope too (a running sum of degree 2), up to the ends.
func TestResampleKeepsSlopes(t *testing.T) {
	const columns = 40
	r := newResampler(t, columns)
	row := make([]float32, columns)
	for x := range row {
		row[x] = 100 - 2*float32(x)
	}
	for _, step := range []float64{0.5, 0.97, 1, 1.31, 3, 9.7} {
		for _, start := range []float64{-0.5, -0.29, 0.123} {
			edges := evenEdges(start, step, int((39.5-start)/step)+1)
			v := newVoxels(len(edges) - 1)
			r.Resample(v, row, make([]float32, columns), nil, edges)
			for i, got := range v.Signal {
				mid := (edges[i] + edges[i+1]) / 2
				require.InDelta(t, step*(100-2*mid), got, 2e-4*step, "step %g, voxel %d", step, i)
			}
		}
	}
}

// Identity 1 on whole pixels, and the worked example of the reference page where
// the edges fall on pixel edges: then there is nothing to interpolate, values and
// variances add.
func TestResampleWholePixels(t *testing.T) {
	r := newResampler(t, 12)
	row := []float32{1, 2, 3, 4, 0, 0, 5, 0, 0, 0, 7, 0}
	variance := []float32{1, 1, 1, 1, 2, 2, 2, 2, 3, 3, 3, 3}
	v := newVoxels(3)
	r.Resample(v, row, variance, nil, []float64{-0.5, 1.5, 3.5, 11.5})
	require.InDeltaSlice(t, []float32{3, 7, 12}, v.Signal, 1e-5)
	require.InDeltaSlice(t, []float32{2, 2, 20}, v.Variance, 1e-4)
	require.Equal(t, []Flag{0, 0, 0}, v.Flags)
}

// Rising and falling edges name the same voxels; a stride only moves them.
func TestResampleFallingEdgesAndStride(t *testing.T) {
	r := newResampler(t, 64)
	row := gaussianRow(64, 31.3, 3.4)
	variance := gaussianRow(64, 29, 20)
	edges := evenEdges(5.2, 0.93, 50)
	rising := newVoxels(49)
	r.Resample(rising, row, variance, nil, edges)
	falling := Voxels{make([]float32, 49*3), make([]float32, 49*3), make([]Flag, 49*3), 3}
	back := make([]float64, 50)
	for i, e := range edges {
		back[49-i] = e
	}
	r.Resample(falling, row, variance, nil, back)
	for i := range 49 {
		require.Equal(t, rising.Signal[i], falling.Signal[3*(48-i)])
		require.Equal(t, rising.Variance[i], falling.Variance[3*(48-i)])
		require.Zero(t, falling.Signal[3*i+1], "nothing is written between strides")
	}
}

// The variance is sum w^2 var: against the scatter of N resampled noise rows, N
// independent samples of unequal variances; the standard error of a variance from N
// normal samples is sqrt(2/N) of it. The weights are also read off unit rows.
func TestResampleVarianceMonteCarlo(t *testing.T) {
	const columns, n = 32, 20000
	r := newResampler(t, columns)
	edges := append(evenEdges(-0.5, 1.13, 6), evenEdges(7.3, 2.9, 9)...)
	variance := make([]float32, columns)
	for x := range variance {
		variance[x] = 1 + float32(x%5)
	}
	v := newVoxels(len(edges) - 1)
	squares := make([]float64, len(v.Signal))
	rng := rand.New(rand.NewPCG(20, 26))
	row := make([]float32, columns)
	for range n {
		for x := range row {
			row[x] = float32(rng.NormFloat64() * math.Sqrt(float64(variance[x])))
		}
		r.Resample(v, row, variance, nil, edges)
		for i, s := range v.Signal {
			squares[i] += float64(s) * float64(s)
		}
	}
	exact := make([]float64, len(v.Signal))
	for x := range columns {
		unit := make([]float32, columns)
		unit[x] = 1
		u := newVoxels(len(v.Signal))
		r.Resample(u, unit, variance, nil, edges)
		for i, w := range u.Signal {
			exact[i] += float64(w) * float64(w) * float64(variance[x])
		}
	}
	for i, sum := range squares {
		require.InDelta(t, 1, sum/n/float64(v.Variance[i]), 5*math.Sqrt(2.0/n), "voxel %d", i)
		require.InEpsilon(t, exact[i], float64(v.Variance[i]), 1e-5)
	}
}

// Identity 4: the sum of all elements of the covariance is the sum of the variances.
// For white noise and voxels that tile all, sum_x (sum_i w_ix)^2 var = sum var.
func TestResampleTotalCovariance(t *testing.T) {
	const columns = 24
	r := newResampler(t, columns)
	edges := evenEdges(-0.5, 1.6, 16)
	total := 0.0
	for x := range columns {
		unit := make([]float32, columns)
		unit[x] = 1
		v := newVoxels(15)
		r.Resample(v, unit, unit, nil, edges)
		sum := 0.0
		for _, w := range v.Signal {
			sum += float64(w)
		}
		total += sum * sum
	}
	require.InDelta(t, columns, total, 1e-5)
}

// The fast path against the definition: the running sum in float64, interpolated with
// weights straight from the least squares, at both edges.
func TestResampleAgainstNaive(t *testing.T) {
	d := newDesign()
	rapid.Check(t, func(t *rapid.T) {
		columns := rapid.IntRange(8, 40).Draw(t, "columns")
		row, sum := make([]float32, columns), make([]float64, columns+1)
		for x := range row {
			row[x] = float32(rapid.Float64Range(-1, 1).Draw(t, "value"))
			sum[x+1] = sum[x] + float64(row[x])
		}
		running := func(n int) float64 { // at pixel edge n/phases
			base := min(max(n/phases-middle, 0), columns-taps)
			out := 0.0
			for k, l := range d.weights(n - base*phases) {
				out += l * sum[base+k]
			}
			return out
		}
		place := rapid.IntRange(0, columns*phases)
		a, b := place.Draw(t, "one edge"), place.Draw(t, "other edge")
		r, err := NewResampler(0, columns-1)
		require.NoError(t, err)
		v := newVoxels(1)
		r.Resample(v, row, make([]float32, columns), nil, []float64{float64(a)/phases - 0.5, float64(b)/phases - 0.5})
		if a == b {
			require.Equal(t, NoData, v.Flags[0], "a voxel of no width")
			return
		}
		require.InDelta(t, running(max(a, b))-running(min(a, b)), v.Signal[0], 2e-5)
	})
}

func TestResampleCoverage(t *testing.T) {
	r, err := NewResampler(4, 35)
	require.NoError(t, err)
	row := make([]float32, 40)
	for x := range row {
		row[x] = 10
	}
	row[3], row[36] = 1e9, 1e9 // takes no light: must not be read
	// The lit range is 3.5 to 35.5.
	edges := []float64{1.5, 2.5, 3.4, 4.4, 5.4, 33.4, 34.505, 35.505, 36.2, 37, math.NaN(), 20, 21}
	v := newVoxels(len(edges) - 1)
	r.Resample(v, row, row, nil, edges)
	// Beside an edge at NaN, coverage is NaN: not below 99 %, nor above 50 %.
	want := []Flag{NoData | Partial, NoData | Partial, Partial, 0, 0, 0, 0, NoData | Partial, NoData | Partial, NoData, NoData, 0}
	for i := range want {
		require.Equal(t, want[i], v.Flags[i], "voxel %d", i)
		require.Equal(t, v.Flags[i]&NoData != 0, v.Signal[i] != v.Signal[i], "NaN exactly at NoData, voxel %d", i)
		require.Equal(t, v.Flags[i]&NoData != 0, v.Variance[i] != v.Variance[i])
	}
	require.InDelta(t, 9, v.Signal[2], 1e-4, "light of the covered part")
	_, err = NewResampler(0, 6)
	require.ErrorContains(t, err, "fewer than")
}

// A bad pixel voids the voxels that it reaches with more than 0.1, and no other;
// the weights are read off a unit row.
func TestResampleFlags(t *testing.T) {
	const columns = 64
	r := newResampler(t, columns)
	for _, step := range []float64{0.5, 1, 1.37, 3, 12} {
		for bad := range columns {
			unit := make([]float32, columns)
			unit[bad] = 1
			bits := make([]Flag, columns)
			bits[bad] = BadPixel | LowFlat
			var flags RowFlags
			flags.Set(bits)
			edges := evenEdges(-0.41, step, int(63.5/step))
			v := newVoxels(len(edges) - 1)
			r.Resample(v, unit, unit, &flags, edges)
			voided := 0 // the bound is this interpolant's, measured
			for i, w := range v.Signal {
				require.Equal(t, math.Abs(float64(w)) > 0.1, v.Flags[i] == BadPixel|LowFlat, "step %g, pixel %d, voxel %d, weight %g", step, bad, i, w)
				if v.Flags[i] != 0 {
					voided++
				}
			}
			if bad > 5 && bad < columns-6 {
				require.LessOrEqual(t, voided, 2+int(2/step), "step %g, pixel %d", step, bad)
			}
		}
	}
}

// A reach of 0.3 makes a weight of 0.33 the limit.
func TestResampleFlagsReach(t *testing.T) {
	r := newResampler(t, 20)
	var flags RowFlags
	bits := make([]Flag, 20)
	bits[10] = BadPixel
	flags.Set(bits)
	flags.Reach[10] = 0.3
	v := newVoxels(2)
	r.Resample(v, make([]float32, 20), make([]float32, 20), &flags, []float64{9.3, 9.72, 10.7}) // weights about 0.2 and 0.9
	require.Equal(t, []Flag{0, BadPixel}, v.Flags)
	bits[10] = NoData
	flags.Set(bits)
	r.Resample(v, make([]float32, 20), make([]float32, 20), &flags, []float64{7.5, 8.5, 10.5})
	require.Equal(t, []Flag{0, NoData}, v.Flags)
	require.True(t, v.Signal[1] != v.Signal[1] && v.Signal[0] == 0)
}

func BenchmarkResample(b *testing.B) {
	const columns, nl = 640, 400
	r := newResampler(b, columns)
	row, variance := gaussianRow(columns, 300, 50), gaussianRow(columns, 310, 400)
	var flags RowFlags
	bits := make([]Flag, columns)
	bits[211] = BadPixel
	flags.Set(bits)
	edges := evenEdges(100.3, 1.013, nl+1)
	v := newVoxels(nl)
	b.SetBytes(nl * 10)
	b.ReportAllocs()
	for b.Loop() {
		r.Resample(v, row, variance, &flags, edges)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/nl, "ns/voxel")
}
