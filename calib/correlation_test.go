package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// Pixels of independent noise, straightened and resampled as the reduction does it:
// the variance of sums over 40 voxels and over 6 rows against what Correlation says,
// N = 4000 sums each (standard error sqrt(2/N) = 2.2 %; the sums' ends, which share
// pixels with voxels outside, add less than 2 %).
func TestCorrelationMonteCarlo(t *testing.T) {
	const columns, rows, first, last, summed = 120, 40, 12, 17, 40
	shift := make([]float64, columns)
	for x := range shift {
		shift[x] = 0.012 * float64(x-60)
	}
	straighten, err := NewRowShift(shift, rows)
	require.NoError(t, err)
	resampler, err := NewResampler(0, columns-1)
	require.NoError(t, err)
	edges := make([]float64, summed+1)
	for i := range edges {
		edges[i] = 20.3 + 1.04*float64(i)
	}
	alongWavelength, alongSlit := Correlation(straighten, resampler, edges, 15)

	rng := rand.New(rand.NewPCG(3, 5))
	straight, variance := make([]float32, columns), make([]float32, columns)
	ones := make([]float32, columns)
	signals, ownVariances := make([]float32, summed), make([]float32, summed)
	flags := make([]Flag, summed)
	frame, quiet := make([][]float32, rows), make([][]float32, rows)
	for x := range ones {
		ones[x] = 1
	}
	for y := range frame {
		frame[y], quiet[y] = make([]float32, columns), ones
	}
	var rowSquare, rowOwn, allSquare float64
	const trials = 4000
	for range trials {
		for _, row := range frame {
			for x := range row {
				row[x] = float32(rng.NormFloat64())
			}
		}
		all := 0.0
		for y := first; y <= last; y++ {
			from, to := straighten.Span(y)
			straighten.Signal(straight, frame[from:to+1], from, y)
			straighten.Variance(variance, quiet[from:to+1], from, y)
			resampler.Resample(Voxels{Signal: signals, Variance: ownVariances, Flags: flags, Stride: 1}, straight, variance, nil, edges)
			sum := 0.0
			for i, v := range signals {
				sum += float64(v)
				if y == first {
					rowOwn += float64(ownVariances[i]) / trials
				}
			}
			if y == first {
				rowSquare += sum * sum / trials
			}
			all += sum
		}
		allSquare += all * all / trials
	}
	t.Logf("along the wavelength %.3f (sums %.3f), along both %.3f (sums %.3f)", alongWavelength, rowSquare/rowOwn, alongWavelength*alongSlit, allSquare/(rowOwn*(last-first+1)))
	tolerance := 5*math.Sqrt(2.0/trials) + 0.02
	require.InDelta(t, rowSquare/rowOwn, alongWavelength, tolerance*alongWavelength)
	// Sums of six rows lose at their ends a tenth of what rows share.
	require.InDelta(t, allSquare/(rowOwn*(last-first+1)), alongWavelength*alongSlit, (tolerance+0.1)*alongWavelength*alongSlit)
	require.Greater(t, alongSlit, 1.05)

	alone, none := Correlation(straighten, resampler, []float64{-50, -49}, 15)
	require.Equal(t, []float64{1, 1}, []float64{alone, none})
}

// A slit of 20 rows against the light counted by adding Gaussians in small steps.
func TestIllumination(t *testing.T) {
	var centres []float64
	for w := range 20 {
		centres = append(centres, 10.3+1.02*float64(w))
	}
	centres = append(centres[:8], centres[9:]...) // a closed row
	dst := make([]float64, 45)
	Illumination(dst, centres, 1.02, 3.2)
	for y, got := range dst {
		want := 0.0
		for k := range 400 {
			for _, c := range centres {
				u := (float64(y) - 0.5 + (float64(k)+0.5)/400 - c) * 2.3548200450309493 / 3.2
				want += 1.02 / 400 * math.Exp(-u*u/2) * 2.3548200450309493 / 3.2 / math.Sqrt(2*math.Pi)
			}
		}
		require.InDelta(t, want, got, 2e-5, "row %d", y)
	}
	require.InDelta(t, 1, dst[24], 1e-3)
	require.Less(t, dst[18], 0.9)
	require.Zero(t, dst[44])
}
