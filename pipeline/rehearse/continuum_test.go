package rehearse

import (
	"context"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// A spectrum is scaled to the AB magnitude and goes with the night.
func TestContinuumOfTable(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "scene.yaml")
	require.NoError(t, os.WriteFile(path, []byte(`seeing_fwhm_arcsec: 1.1
sources:
  - {kind: star, east_arcsec: 1, north_arcsec: 2, ab_mag: 17, at_nm: 550, spectrum_csv: s.csv}
`), 0o666))
	require.NoError(t, os.WriteFile(filepath.Join(dir, "s.csv"), []byte("wavelength_nm,relative_flux\n500,1\n600,3\n"), 0o666))
	s, err := LoadScene(path)
	require.NoError(t, err)
	of := photons(s, &s.Sources[0])
	// At 550 nm as the AB magnitude says: 0.9963399 e8 x 10^-6.8; at 600 the
	// energy is 3/2 of that at 550, the photons 3/2 x 600/550.
	require.InEpsilon(t, ab550*math.Pow(10, -0.4*17), of(550), 1e-4)
	require.InEpsilon(t, of(550)*1.5*600/550, of(600), 1e-12)
	require.Zero(t, of(601))
	require.Zero(t, of(499))

	p := smallProfile(t, "optical")
	night, _ := rehearsed(t, planned(t, p, smallTarget(p)), s, Options{NoTruth: true})
	again, err := LoadScene(filepath.Join(night, TruthFolder, SceneFile))
	require.NoError(t, err)
	require.Equal(t, s, again)
}

// A file that would replace one of the truth's is refused.
func TestTruthKeepsItsNames(t *testing.T) {
	dir := t.TempDir()
	path := filepath.Join(dir, "scene.yaml")
	require.NoError(t, os.WriteFile(path, []byte(`seeing_fwhm_arcsec: 1.1
refstar: {ab_mag: 12, at_nm: 550, spectrum_csv: `+StarFile+`}
`), 0o666))
	require.NoError(t, os.WriteFile(filepath.Join(dir, StarFile), []byte("wavelength_nm,relative_flux\n500,1\n600,2\n"), 0o666))
	s, err := LoadScene(path)
	require.NoError(t, err)
	_, err = Run(context.Background(), planned(t, airProfile(t, instrument.Square, 1), airTarget()), s, noiseless, t.TempDir(), nil)
	require.EqualError(t, err, "scene: its file refstar_flux.csv has a name of the truth's own; give it another")
}
