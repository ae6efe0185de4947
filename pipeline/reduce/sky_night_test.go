package reduce_test

import (
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// skyRecipe is the nominal recipe with that sky.
func skyRecipe(t *testing.T, sky reduce.SkyRecipe) *reduce.Recipe {
	t.Helper()
	r, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	r.Sky = sky
	return r
}

// A small night without its sky: the pulls against the truth without it are normal, the
// report says what was chosen; bytes depend neither on workers nor on memory; a sky that
// cannot be found leaves the cube with exit code 3, as it would be without.
func TestSkyNight(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	night, err := f.Plan(t.Context(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(t.Context(), trial.Noisy, rehearse.Options{Seed: 4}))
	run := func(sky reduce.SkyRecipe, workers int, memory int64) (*reduce.Result, []byte) {
		require.NoError(t, os.RemoveAll(night.Run(trial.Noisy)))
		result, err := night.Reduce(t.Context(), trial.Noisy, reduce.Options{Cube: true, Recipe: skyRecipe(t, sky), Workers: workers, MemoryBytes: memory})
		require.NoError(t, err)
		data, err := os.ReadFile(night.CubePath(trial.Noisy))
		require.NoError(t, err)
		require.NoDirExists(t, filepath.Join(night.Run(trial.Noisy), "scratch"))
		return result, data
	}
	off := reduce.SkyRecipe{Use: "off"}
	_, without := run(off, 2, 0)
	result, data := run(reduce.SkyRecipe{Use: "auto", Rows: [][2]int{{500, 510}}}, 2, 0)
	require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	require.Contains(t, result.Degraded[0], "the sky was not subtracted: sky: the named elements and rows hold 0 places")
	require.Nil(t, result.Run.Sky)
	require.True(t, string(without) == string(data), "a sky that cannot be found changes the cube")

	_, few := run(reduce.SkyRecipe{Use: "auto"}, 1, 128<<20)
	result, data = run(reduce.SkyRecipe{Use: "auto"}, 3, 0)
	require.True(t, string(few) == string(data), "bytes depend on workers or memory")
	require.Empty(t, result.Degraded)
	require.Greater(t, result.Run.Sky.Share, 0.04) // a small field, and full
	text, err := os.ReadFile(filepath.Join(night.Run(trial.Noisy), product.ReportFile))
	require.NoError(t, err)
	require.Contains(t, string(text), "The light of the sky was subtracted")

	c, err := trial.ReadCube(night.CubePath(trial.Noisy))
	require.NoError(t, err)
	truth, err := c.ReadTruth(night.TruthPath(trial.Noisy))
	require.NoError(t, err)
	sky := skyTruth(t, night.TruthPath(trial.Noisy))
	var all trial.Moments
	for i := range truth {
		if c.Good(i) {
			all.Add((float64(c.Signal[i]) - float64(truth[i]-sky[i])) / sqrt(c.Variance[i]))
		}
	}
	t.Logf("pulls %.4f +- %.4f of %d", all.Mean(), all.Std(), all.N)
	// The sky's error, of a tenth of a voxel's or less, is one for all voxels of 96 wavelengths.
	require.InDelta(t, 0, all.Mean(), 0.1*5/sqrt(96)+0.02)
	require.InDelta(t, 1, all.Std(), 0.03)
}

func skyTruth(t *testing.T, path string) []float32 {
	t.Helper()
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close()
	im, err := f.ImageNamed(product.Sky)
	require.NoError(t, err)
	plane := im.Width() * im.Height()
	all := make([]float32, plane*im.Planes())
	for l := range im.Planes() {
		require.NoError(t, im.ReadPlaneRows(all[l*plane:(l+1)*plane], l, 0, im.Height()))
	}
	return all
}

func sqrt[T float32 | float64 | int](x T) float64 { return math.Sqrt(float64(x)) }
