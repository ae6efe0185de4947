package reduce_test

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// arcRecipe is the default recipe with the arcs of a cube.fits.
func arcRecipe(t *testing.T, cube string) *reduce.Recipe {
	t.Helper()
	path := filepath.Join(t.TempDir(), "recipe.yaml")
	require.NoError(t, os.WriteFile(path, []byte("arc: {use: "+cube+"}\n"), 0o644))
	r, err := reduce.LoadRecipe(path)
	require.NoError(t, err)
	return r
}

// geometryOf lists the geometry's cards of a cube.fits.
func geometryOf(t *testing.T, cube string) (list []float64) {
	t.Helper()
	f, err := fitsutil.Open(cube)
	require.NoError(t, err)
	defer f.Close()
	table, err := f.Table(product.Dispersion)
	require.NoError(t, err)
	for _, key := range []string{"XC", "YC", "XE", "JC", "LC", "D1", "D2", "D3", "SLIT", "SMIL", "TILT", "CURV"} {
		v, err := table.Header.Float("GEOM" + key)
		require.NoError(t, err)
		list = append(list, v)
	}
	return list
}

// A night without arcs takes the geometry of another run of the same instrument, to
// the last bit, and its wavelengths are no nominal ones. The cube of another
// instrument, or of other elements, is refused: then they are.
func TestBorrowedArcs(t *testing.T) {
	ctx := context.Background()
	night := func(change func(f *trial.Field)) *trial.Night {
		f, err := trial.Lamps()
		require.NoError(t, err)
		change(f)
		n, err := f.Plan(ctx, t.TempDir())
		require.NoError(t, err)
		require.NoError(t, n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true}))
		return n
	}
	lender := night(func(*trial.Field) {})
	_, err := lender.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	require.NoError(t, err)
	cube := lender.CubePath(trial.Noisy)

	for _, c := range []struct {
		name, why string
		change    func(f *trial.Field)
	}{
		{"same", "", func(*trial.Field) {}},
		{"another instrument", `is of the instrument "optical", not "another"`, func(f *trial.Field) { f.Profile.Name = "another" }},
		{"other elements", "has 47 elements, not 31", func(f *trial.Field) { f.SetCode("m-sequence", 63, 32) }},
	} {
		n := night(func(f *trial.Field) {
			f.Target.Calibration.Arc = sequence.ArcFrames{Every: 1}
			c.change(f)
		})
		r, err := n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: arcRecipe(t, cube)})
		require.NoError(t, err, c.name)
		got, err := trial.ReadCube(n.CubePath(trial.Noisy))
		require.NoError(t, err)
		for i, f := range got.Flags {
			require.Equal(t, c.why != "", f&product.FlagNominalWave != 0, "%s, voxel %d", c.name, i)
		}
		if c.why == "" {
			require.Empty(t, r.Degraded)
			require.Equal(t, geometryOf(t, cube), geometryOf(t, n.CubePath(trial.Noisy)))
			continue
		}
		require.Contains(t, r.Degraded[0], c.why)
	}
}

// The user is told of a profile whose gain is not the detector's.
func TestGainUnlikeTheProfiles(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Lamps()
	require.NoError(t, err)
	n, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 2, NoTruth: true}))
	r, err := n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	require.NoError(t, err)
	require.Empty(t, r.Run.Warnings)
	truth := f.Profile.Detector.Amplifiers
	require.Len(t, r.Run.Calibration.Amplifiers, 2)
	for i, a := range r.Run.Calibration.Amplifiers {
		require.InDelta(t, truth[i].GainEPerADU, a.GainEPerADU, 5*a.GainError)
		require.InDelta(t, truth[i].ReadNoiseE, a.ReadNoiseE, 5*a.ReadNoiseError)
	}
	f.Profile.Detector.Amplifiers[0].GainEPerADU = 1.7
	other, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, os.Symlink(n.Frames(trial.Noisy), other.Frames(trial.Noisy)))
	r, err = other.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	require.NoError(t, err)
	require.NotEmpty(t, r.Run.Warnings)
	require.Regexp(t, `^amplifier 1: the gain measured is 1\.[23]`, r.Run.Warnings[0])
}
