package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Stefan-Boltzmann and Wien: constants of CODATA 2018, sigma = 5.670374419e-8
// W m-2 K-4 and b = 2.897771955e-3 m K. The number of photons is sigma_q T^3 with
// sigma_q = 1.5204606e15 s-1 m-2 K-3 (4 pi zeta(3) c (k/hc)^3, from memory).
func TestPlanckIntegrals(t *testing.T) {
	for _, temperature := range []float64{300, 5772, 25000} {
		energy, photons, peak, at := 0.0, 0.0, 0.0, 0.0
		const steps = 20000
		for i := range steps {
			// Equal steps in log L from 1/200 to 1e4 times Wien's wavelength.
			log := math.Log(1e-2/2) + (float64(i)+0.5)/steps*math.Log(2e6)
			nm := 2.897771955e6 / temperature * math.Exp(log)
			width := nm * math.Log(2e6) / steps
			b := PlanckEnergy(nm, temperature)
			energy += math.Pi * b * width
			photons += math.Pi * PlanckPhotons(nm, temperature) * width
			if b > peak {
				peak, at = b, nm
			}
		}
		require.InEpsilon(t, 5.670374419e-8*math.Pow(temperature, 4), energy, 1e-7)
		require.InEpsilon(t, 1.5204606e15*math.Pow(temperature, 3), photons, 1e-6)
		require.InEpsilon(t, 2.897771955e6/temperature, at, 1e-3)
	}
	require.Zero(t, PlanckEnergy(1, 10))
	for _, bad := range [][2]float64{{0, 5000}, {500, 0}, {-1, 5000}, {500, math.NaN()}} {
		require.True(t, math.IsNaN(PlanckPhotons(bad[0], bad[1])))
	}
}

// h c = 1239.841984 eV nm and 1 eV = 1.602176634e-19 J (SI 2019).
func TestPhotons(t *testing.T) {
	require.InEpsilon(t, 1239.841984/500*1.602176634e-19, PhotonEnergy(500), 1e-9)
	require.InEpsilon(t, 1/(1239.841984/656.46*1.602176634e-19), LinePhotons(1, 656.46), 1e-9)
}
