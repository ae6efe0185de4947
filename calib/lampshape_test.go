package calib

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Against a sum over elements and wavelengths that puts each bit of light where
// Geometry.X says, spread by a Gaussian: the forward direction, which LampShape never
// takes.
func TestLampShape(t *testing.T) {
	g := Geometry{X_c: 150, Y_c: 10, X_e: 2.1, J_c: 15, L_c: 600, D: [3]float64{2, 3e-4, -1e-6}, SlitTilt: 0.02, Smile: 1e-3}
	const columns, rows, elements, fwhm = 300, 3, 31, 3.2
	lamp := func(nm float64) float64 {
		if nm < 560 || nm > 640 {
			return 0
		}
		return 1 + (nm-600)/100
	}
	got := make([]float32, columns*rows)
	require.NoError(t, LampShape(got, g, elements, columns, fwhm, lamp))
	want := make([]float64, columns)
	const step = 0.01
	for j := range elements {
		for nm := 560 + step/2; nm < 640; nm += step {
			x := g.X(float64(j), 2, nm)
			for p := max(0, int(x)-8); p < min(columns, int(x)+9); p++ {
				u := (float64(p) - x) * 2.3548200450309493 / fwhm
				want[p] += lamp(nm) * step * math.Exp(-u*u/2) * 2.3548200450309493 / fwhm / math.Sqrt(2*math.Pi)
			}
		}
	}
	brightest := 0.0
	for _, v := range want {
		brightest = max(brightest, v)
	}
	for x, v := range want {
		// The table's steps: an eighth of a pixel at the sharp ends of the band.
		require.InDelta(t, v/brightest, float64(got[2*columns+x])/brightest, 1e-3, "column %d", x)
	}
	require.Error(t, LampShape(got[:7], g, elements, columns, fwhm, lamp))
}
