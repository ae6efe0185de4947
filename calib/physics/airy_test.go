package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// Figures in units of L N computed with scipy 1.10.1 from (2 J1(v)/v)^2 and from Rayleigh's
// 1 - J0^2 - J1^2: here L N = 1 um.
func TestAiryFigures(t *testing.T) {
	const nm, n = 1000, 1
	require.InDelta(t, 1.028993970, AiryFWHM(nm, n), 1e-9)
	require.InDelta(t, 0.5, AiryIntensity(AiryFWHM(nm, n)/2, nm, n), 1e-12)
	require.InDelta(t, 1.219669891, AiryRadius(nm, n), 1e-9)
	rings := []float64{1.219669891, 2.233130594, 3.238315484, 4.241062864}
	for i, inside := range []float64{0.837784867, 0.909930536, 0.937647473, 0.952319165} {
		require.InDelta(t, 0, AiryIntensity(rings[i], nm, n), 1e-15)
		require.InDelta(t, inside, AiryEncircled(rings[i], nm, n), 5e-9) // J0(j_1,1)^2 = 0.162215131 and so on: the last digit listed is off
	}
	for radius, inside := range map[float64]float64{0.534832: 0.5, 0.896942: 0.8, 1.900688: 0.9, 0.5: 0.455925, 1: 0.826431} {
		require.InDelta(t, inside, AiryEncircled(radius, nm, n), 1e-6)
	}
	// At f/4: full width and radius of the first dark ring, um.
	for nm, want := range map[float64][2]float64{500: {2.057988, 2.439340}, 650: {2.675384, 3.171142}, 850: {3.498580, 4.146878}} {
		require.InDelta(t, want[0], AiryFWHM(nm, 4), 1e-6)
		require.InDelta(t, want[1], AiryRadius(nm, 4), 1e-6)
	}
	require.InDelta(t, 1, AiryIntensity(0, nm, n), 0)
	require.InDelta(t, AiryIntensity(2e-4, nm, n), AiryIntensity(0.99e-4, nm, n), 1e-6)
	for _, bad := range []float64{AiryFWHM(0, 4), AiryRadius(500, -1), AiryIntensity(1, math.NaN(), 4), AiryEncircled(1, 500, 0), AiryStrip(1, 0, 1), AiryStrip(math.NaN(), 500, 4)} {
		require.True(t, math.IsNaN(bad))
	}
}

// Circles and strips against integrals over the image by scipy.
func TestCrosscheckAiry(t *testing.T) {
	for _, c := range mirrorAnswersOf(t).Airy {
		require.InDelta(t, c.Circle, AiryEncircled(c.Width/2, c.Nm, c.FNumber), 1e-7, "%+v", c)
		// scipy's sum over rings ends at 500 L N.
		require.InDelta(t, c.Strip, AiryStrip(c.Width, c.Nm, c.FNumber), 1e-5, "%+v", c)
	}
}

// A strip holds more than the circle within it and more as it widens; the asymptote meets
// the integral.
func TestAiryStripLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		width, n := rapid.Float64Range(0.1, 300).Draw(t, "width"), rapid.Float64Range(2, 40).Draw(t, "n")
		share := AiryStrip(width, 600, n)
		require.Greater(t, share, AiryEncircled(width/2, 600, n))
		require.Less(t, share, 1.0)
		require.Greater(t, AiryStrip(1.05*width, 600, n), share)
	})
	require.InDelta(t, AiryStrip(999.9, 1000, 1), AiryStrip(1000.1, 1000, 1), 1e-6)
}
