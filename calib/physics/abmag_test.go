package physics

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Computed with astropy 5.2.1 (units' spectral_density) for 3631 Jy: photons s-1
// m-2 nm-1 at m = 0 and 20, and erg s-1 cm-2 A-1 at m = 0. The exact zero point of
// -48.60 gives 6.04e-5 less.
func TestABAgainstAstropy(t *testing.T) {
	for _, c := range []struct{ nm, photons, exact, at20, erg float64 }{
		{400, 1.369967e8, 1.369885e8, 1.369967, 6.803415e-9},
		{500, 1.095974e8, 1.095908e8, 1.095974, 4.354186e-9},
		{550, 9.963399e7, 9.962797e7, 0.996340, 3.598501e-9},
		{600, 9.133116e7, 9.132564e7, 0.913312, 3.023740e-9},
		{700, 7.828385e7, 7.827912e7, 0.782839, 2.221523e-9},
		{800, 6.849837e7, 6.849423e7, 0.684984, 1.700854e-9},
		{900, 6.088744e7, 6.088376e7, 0.608874, 1.343884e-9},
		{1000, 5.479870e7, 5.479538e7, 0.547987, 1.088546e-9},
	} {
		require.InEpsilon(t, c.photons, ABPhotons(0, c.nm), 1e-6)
		require.InEpsilon(t, c.exact*(1+6.04e-5), ABPhotons(0, c.nm), 1e-6)
		require.InEpsilon(t, c.at20, ABPhotons(20, c.nm), 1e-6)
		require.InEpsilon(t, c.erg*0.01, ABEnergy(0, c.nm), 1e-6) // 1 erg/s/cm2/A = 0.01 W/m2/nm
		require.InEpsilon(t, ABEnergy(7, c.nm), ABPhotons(7, c.nm)*PhotonEnergy(c.nm), 1e-14)
		require.InDelta(t, 17.3, ABFromPhotons(ABPhotons(17.3, c.nm), c.nm), 1e-12)
		require.InDelta(t, 17.3, ABFromEnergy(ABEnergy(17.3, c.nm), c.nm), 1e-12)
	}
	require.True(t, math.IsInf(ABFromPhotons(0, 500), 1))
	require.True(t, math.IsNaN(ABFromEnergy(-1, 500)))
}

// A published course table (after Bessell 1979): 1 Jy is 1.51e7 photons s-1 m-2 per
// unit of dlambda/lambda; for f(V=0) = 3640 Jy, V = 23.90 and dlambda/lambda = 0.16
// it counts 2.42 photons s-1 m-2.
func TestABAgainstBessell(t *testing.T) {
	require.InEpsilon(t, 1.51e7*ABZero_Jy, ABPhotons(0, 550)*550, 1e-3)
	require.InDelta(t, 2.42, ABPhotons(23.90, 550)*3640/ABZero_Jy*0.16*550, 0.005)
}
