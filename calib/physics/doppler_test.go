package physics

import (
	"encoding/json"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
	"pgregory.net/rapid"
)

func TestDopplerByHand(t *testing.T) {
	require.Equal(t, 1.0, DopplerFactor(0))
	// b = 0.6: sqrt(1.6/0.4) = 2.
	require.InDelta(t, 2, DopplerFactor(0.6*299792.458), 1e-14)
	require.InDelta(t, 0.5, DopplerFactor(-0.6*299792.458), 1e-14)
	require.InDelta(t, 1+100/299792.458, DopplerFactor(100), 1e-7)
	for _, v := range []float64{299792.458, -299792.458, math.NaN()} {
		require.True(t, math.IsNaN(DopplerFactor(v)))
	}
	require.True(t, math.IsNaN(RadialVelocity(0)))
}

func TestDopplerRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64Range(-250000, 250000).Draw(t, "km/s")
		require.InDelta(t, v, RadialVelocity(DopplerFactor(v)), 1e-9)
	})
}

// astropy: Doppler shifts (doppler_relativistic), black bodies and AB magnitudes.
func TestCrosscheckFormulas(t *testing.T) {
	var got struct {
		Doppler []struct{ Velocity, Factor float64 }
		Planck  []struct{ Wavelength, Temperature, Energy, Photons float64 }
		AB      []struct{ Magnitude, Wavelength, Photons, Energy float64 }
	}
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_physics.py", fmt.Sprint(ABZero_Jy))), &got))
	for _, c := range got.Doppler {
		require.InEpsilon(t, c.Factor, DopplerFactor(c.Velocity), 1e-12)
	}
	for _, c := range got.Planck {
		require.InEpsilon(t, c.Energy, PlanckEnergy(c.Wavelength, c.Temperature), 1e-9)
		require.InEpsilon(t, c.Photons, PlanckPhotons(c.Wavelength, c.Temperature), 1e-9)
	}
	for _, c := range got.AB {
		require.InEpsilon(t, c.Photons, ABPhotons(c.Magnitude, c.Wavelength), 1e-9)
		require.InEpsilon(t, c.Energy, ABEnergy(c.Magnitude, c.Wavelength), 1e-9)
	}
	require.NotEmpty(t, got.Doppler)
	require.NotEmpty(t, got.Planck)
	require.NotEmpty(t, got.AB)
}
