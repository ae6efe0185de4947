package calib

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// starPicture is a Gaussian star of widths 0.9 and 2.2 places on a sky of 50.
func starPicture(rng *rand.Rand, element, row, peak, sigma float64) (picture, variance []float64) {
	const rows, elements = 40, 21
	for y := range rows {
		for j := range elements {
			u, w := (float64(j)-element)/0.9, (float64(y)-row)/2.2
			picture = append(picture, 50+peak*math.Exp(-(u*u+w*w)/2)+sigma*rng.NormFloat64())
			variance = append(variance, sigma*sigma+1e-12)
		}
	}
	return picture, variance
}

// Stars of S/N 20 a place at random phases: no bias, errors hold. 800 stars.
func TestFitCentroid(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 6))
	const stars = 800
	var mean, square [2]float64
	for range stars {
		element, row := 9+2*rng.Float64(), 18+4*rng.Float64()
		picture, variance := starPicture(rng, element, row, 100, 5)
		variance[15*21+9], picture[15*21+9] = 0, math.NaN() // a bad place does no harm
		c, err := FitCentroid(picture, variance, 21, 10, 20, 1.2, 1.8, 6, 12)
		require.NoError(t, err)
		for k, pull := range []float64{(c.Element - element) / c.ElementErr, (c.Row - row) / c.RowErr} {
			mean[k] += pull / stars
			square[k] += pull * pull / stars
		}
	}
	t.Logf("pulls: mean %.3f, square %.3f", mean, square)
	for k := range mean {
		require.InDelta(t, 0, mean[k], 5/math.Sqrt(stars))
		// Errors that grow with chi2 above 1 and do not shrink below are 3 % too large.
		require.InDelta(t, 0.95, square[k], 5*math.Sqrt(2.0/stars))
	}
}

func TestFitCentroidRefused(t *testing.T) {
	rng := rand.New(rand.NewPCG(7, 7))
	picture, variance := starPicture(rng, 10, 20, 0, 5)
	_, err := FitCentroid(picture, variance, 21, 10, 20, 1, 2, 6, 12)
	require.ErrorContains(t, err, "no star of S/N 5 around element 10.0, row 20.0")
	_, err = FitCentroid(picture, variance, 21, -30, 20, 1, 2, 6, 12)
	require.ErrorContains(t, err, "0 usable places")
}

// scipy's curve_fit on the same picture.
func TestCrosscheckCentroid(t *testing.T) {
	picture, variance := starPicture(rand.New(rand.NewPCG(8, 8)), 10.3, 19.6, 120, 4)
	c, err := FitCentroid(picture, variance, 21, 10, 20, 1, 2, 6, 12)
	require.NoError(t, err)
	text, err := json.Marshal(map[string]any{"picture": picture, "sigma": 4, "elements": 21, "x": []int{4, 16}, "y": []int{8, 32}})
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "star.json")
	require.NoError(t, os.WriteFile(path, text, 0o644))
	var want struct{ Element, Row, ElementErr, RowErr, Light float64 }
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_centroid.py", path)), &want))
	require.InDelta(t, want.Element, c.Element, 1e-4)
	require.InDelta(t, want.Row, c.Row, 1e-4)
	require.InEpsilon(t, want.Light, c.Light, 1e-4)
	require.InEpsilon(t, want.ElementErr*math.Sqrt(max(1, c.Chi2)), c.ElementErr, 1e-3)
	require.InEpsilon(t, want.RowErr*math.Sqrt(max(1, c.Chi2)), c.RowErr, 1e-3)
}
