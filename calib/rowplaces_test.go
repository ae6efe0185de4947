package calib

import (
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// requireSamePlaces compares with Geometry.X, which solves the model's two equations (see
// TestGeometryRoundTrip): at every element's every edge. 1e-6 px is far below what any
// wavelength is known to.
func requireSamePlaces(t require.TestingT, g Geometry, w Wavelengths, elements int, rows ...float64) {
	p := NewRowPlaces(g, elements, w)
	dst := make([]float64, w.Count())
	for _, y0 := range rows {
		p.SetRow(y0)
		for j := range elements {
			for i, x := range p.Places(dst, float64(j)) {
				require.InDelta(t, g.X(float64(j), y0, w.at(i)), x, 1e-6, "element %d, row %g, edge %d", j, y0, i)
			}
		}
	}
}

func TestRowPlaces(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := drawGeometry(t)
		even := NewWavelengths(func(i float64) float64 { return 630 + 0.5*i }, 0.5, -0.5, 81)
		listed := NewWavelengths(func(i float64) float64 { return 670 - 0.5*i - 1e-4*i*i }, 0, -0.5, 81)
		y := rapid.Float64Range(0, 199).Draw(t, "row")
		requireSamePlaces(t, g, even, 40, y)
		requireSamePlaces(t, g, listed, 40, y)
	})
}

// The worst geometry that Check lets pass: a slit leaning so much and a trace bent by so
// much that their slopes multiply to 0.1 at the detector's ends.
func TestRowPlacesAtTheLimit(t *testing.T) {
	g := Geometry{X_c: 511.5, Y_c: 511.5, X_e: 1.96, J_c: 119, L_c: 600, D: [3]float64{4, 2e-4, -1e-6},
		SlitTilt: 0.8, Smile: 1.15e-3, TraceTilt: 0.02, TraceCurve: 2.8e-5}
	w := NewWavelengths(func(i float64) float64 { return 540 + 0.25*i }, 0.25, -0.5, 481)
	require.NoError(t, g.Check(1024, 1024, 540, 660))
	bent := g
	bent.Smile *= 1.1
	require.Error(t, bent.Check(1024, 1024, 540, 660), "this is the limit")
	requireSamePlaces(t, g, w, 239, 0, 300, 1023)
}

func BenchmarkRowPlaces(b *testing.B) {
	g := plain()
	w := NewWavelengths(func(i float64) float64 { return 560 + 0.25*i }, 0.25, -0.5, 401)
	p := NewRowPlaces(g, 100, w)
	p.SetRow(70)
	dst := make([]float64, w.Count())
	b.SetBytes(int64(8 * len(dst)))
	b.ReportAllocs()
	for b.Loop() {
		p.Places(dst, 50)
	}
}
