package combine

import (
	"math/rand/v2"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// Runs without their sky, in units of flux: the cube is their mean by 1/VARIANCE as of any, in
// their unit, and says that the sky was taken off; exposures may differ.
func TestCombineOnSky(t *testing.T) {
	const unit = "aW m-2 nm-1"
	rng := rand.New(rand.NewPCG(5, 5))
	dir := t.TempDir()
	fakes := []*fake{newFake(rng, filepath.Join(dir, "run0"), 0, 0, 5, 9), newFake(rng, filepath.Join(dir, "run1"), 0, 0, 5, 9)}
	for _, f := range fakes {
		f.unit, f.cards = unit, []fitsutil.Card{{Key: "SKYTAKEN", Value: true}}
	}
	fakes[1].dwell = 60
	_, err := runAll(t, dir, fakes, 0, 1)
	require.NoError(t, err)
	out := filepath.Join(dir, "out")
	compare(t, readFake(t, out), fakes, [][2]int{{0, 0}, {0, 0}}, 0, 0)
	f, err := fitsutil.Open(filepath.Join(out, product.CubeFile))
	require.NoError(t, err)
	defer f.Close() // only read from
	im, err := f.ImageNamed(product.Signal)
	require.NoError(t, err)
	have, err := im.Header.Str("BUNIT")
	require.NoError(t, err)
	require.Equal(t, unit, have)
	require.True(t, im.Header.Has("SKYTAKEN"))
}
