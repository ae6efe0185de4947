package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestExtinctionCurve(t *testing.T) {
	c := ExtinctionCurve{{400, 0.4}, {500, 0.2}, {800, 0.05}}
	require.Equal(t, 0.4, c.At(400))
	require.InDelta(t, 0.3, c.At(450), 1e-15)
	require.InDelta(t, 0.15, c.At(600), 1e-15)
	require.InDelta(t, 0.05, c.At(800), 1e-15)
	for _, nm := range []float64{399, 801, math.NaN()} {
		require.True(t, math.IsNaN(c.At(nm)))
	}
	require.True(t, math.IsNaN(ExtinctionCurve(nil).At(500)))
	require.Equal(t, 0.1, ExtinctionCurve{{500, 0.1}}.At(500))
	// f0 = f 10^(0.4 k X): 0.3 mag at air mass 2 leave 10^-0.24.
	require.InDelta(t, 0.5754399, AirTransmission(0.3, 2), 1e-7)
}

// Bucholtz 1995 (Applied Optics 34, 2765), table 3, optical depths of a standard
// atmosphere: 0.3599 at 400 nm, 0.1438 at 500, 0.0684 at 600 (from memory): within 1.5 %.
func TestRayleighExtinction(t *testing.T) {
	for nm, depth := range map[float64]float64{400: 0.3599, 500: 0.1438, 600: 0.0684} {
		require.InEpsilon(t, 1.085736*depth, RayleighExtinction(nm, 101325), 0.015)
	}
	require.InEpsilon(t, RayleighExtinction(450, 101325)/2, RayleighExtinction(450, 101325.0/2), 1e-12)
	require.True(t, math.IsNaN(RayleighExtinction(0, 101325)))
}

// AB 20 at 500 nm: 4.354186e-9 erg s-1 cm-2 A-1 (astropy) 1e-8, times 1e16 aW m-2 nm-1.
func TestABFlux(t *testing.T) {
	require.InEpsilon(t, 0.4354186, ABFlux(20, 500), 1e-6)
	require.InDelta(t, 20, ABFromFlux(ABFlux(20, 500), 500), 1e-12)
	require.InEpsilon(t, ABPhotons(20, 500), PhotonsFromFlux(ABFlux(20, 500), 500), 1e-14)
	require.InEpsilon(t, ABFlux(20, 500), FluxFromPhotons(ABPhotons(20, 500), 500), 1e-14)
}
