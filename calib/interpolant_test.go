package calib

import (
	"encoding/json"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// nodeWeights recovers L_0..L_7 from the tails of a table entry.
func nodeWeights(c *cell, n int) [points]float64 {
	var out [points]float64
	before := 1.0
	for k := range points {
		tail := 0.0
		if k < taps {
			tail = float64(c[n][k])
		}
		out[k] = before - tail
		before = tail
	}
	return out
}

func TestInterpolantReproducesNodesAndParabolas(t *testing.T) {
	table := tails()
	for c := range table {
		for n := 0; n <= phases; n++ {
			f := float64(c) + float64(n)/phases
			w := nodeWeights(&table[c], n)
			// By hand: sum_k L_k(f) (k-f)^m is 1 for m = 0 and 0 for m = 1, 2. The
			// tolerance is float32 rounding times the largest power.
			for m, want := range []float64{1, 0, 0} {
				sum := 0.0
				for k, l := range w {
					sum += l * math.Pow(float64(k)-f, float64(m))
				}
				require.InDelta(t, want, sum, 1e-5, "cell %d, phase %d, degree %d", c, n, m)
			}
			if n%phases == 0 {
				for k, l := range w {
					want := 0.0
					if k == c+n/phases {
						want = 1
					}
					require.InDelta(t, want, l, 1e-6, "a node gives back the node")
				}
			}
			// Mirror image: L_k(f) = L_7-k(7-f).
			mirror := nodeWeights(&table[taps-1-c], phases-n)
			for k := range w {
				require.InDelta(t, mirror[points-1-k], w[k], 1e-6)
			}
		}
	}
}

// The table is linear between phases; the docs claim an error below 4e-7.
func TestInterpolantBetweenPhases(t *testing.T) {
	d := newDesign()
	worst := 0.0
	for n := middle * phases; n < (middle+1)*phases; n += 2 {
		a, b, c := d.weights(n), d.weights(n+1), d.weights(n+2)
		for k := range a {
			// Twice the step makes four times the error.
			worst = max(worst, math.Abs((a[k]+c[k])/2-b[k])/4)
		}
	}
	require.Less(t, worst, 4e-7)
}

// numpy solves the same least squares by another road (QR on the sampled spectrum,
// constraints by their null space from an SVD, other samples).
func TestCrosscheckInterpolantWeights(t *testing.T) {
	var want [][]float64
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_weights.py", "least-squares",
		fmt.Sprint(designFWHM), fmt.Sprint(exactDegree))), &want))
	table := tails()
	require.Len(t, want, taps*8+1)
	for i, row := range want { // f = i/8
		c := min(i/8, taps-1)
		got := nodeWeights(&table[c], (i-8*c)*phases/8)
		for k := range row {
			require.InDelta(t, row[k], got[k], 2e-6, "f = %d/8, node %d", i, k)
		}
	}
}

// scipy's barycentric interpolation of unit vectors gives Lagrange's weights.
func TestCrosscheckLagrangeWeights(t *testing.T) {
	var want [][]float64
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_weights.py", "lagrange")), &want))
	require.Len(t, want, taps*8+1)
	for i, row := range want {
		got := lagrange(float64(i) / 8)
		for k := range row {
			require.InDelta(t, row[k], got[k], 1e-11, "f = %d/8, node %d", i, k)
		}
	}
}
