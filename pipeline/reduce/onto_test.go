package reduce_test

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// fineField is the small square field whose stars' images are well sampled by elements of
// one mirror, as interpolation wants it.
func fineField(t *testing.T) *trial.Field {
	t.Helper()
	f, err := trial.Struckable(63, 16)
	require.NoError(t, err)
	return f
}

// A night reduced onto the voxels of another, whose telescope pointed elsewhere by no whole
// number of voxels, shows the same sky at the same voxels.
func TestOntoAnotherNight(t *testing.T) {
	const elements, rows = 2.37, -1.61
	ctx := t.Context()
	f := fineField(t)
	first, _, err := f.Pair(ctx, filepath.Join(t.TempDir(), "first"), 31)
	require.NoError(t, err)
	second, err := f.Displaced(elements, rows).Plan(ctx, filepath.Join(t.TempDir(), "second"))
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Grid.Onto = first.CubePath(trial.Noisy)
	for name, opts := range map[string]rehearse.Options{trial.Noisy: {Seed: 32, NoTruth: true}, trial.Twin: {Seed: 32, Noiseless: true, NoTruth: true}} {
		require.NoError(t, second.Rehearse(ctx, name, opts))
		result, err := second.Reduce(ctx, name, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		require.Empty(t, result.Degraded)
	}
	want, err := trial.ReadCube(first.CubePath(trial.Twin))
	require.NoError(t, err)
	truth, err := want.ReadTruth(first.TruthPath(trial.Noisy))
	require.NoError(t, err)
	twin, err := trial.ReadCube(second.CubePath(trial.Twin))
	require.NoError(t, err)
	noisy, err := trial.ReadCube(second.CubePath(trial.Noisy))
	require.NoError(t, err)
	// Near the ends of the slit the two nights' truths differ: its image is blurred.
	const blurred = 6
	first0, last0 := want.Rows, 0
	for i := range truth {
		if y := i / want.N % want.Rows; want.Good(i) {
			first0, last0 = min(first0, y), max(last0, y)
		}
	}
	worst, all, good, peak := 0.0, 0, 0, 0.0
	for i, v := range truth {
		if want.Good(i) {
			all++
			peak = max(peak, float64(v))
		}
		if want.Good(i) && twin.Good(i) {
			good++
			d := math.Abs(float64(twin.Signal[i] - v))
			if y := i / want.N % want.Rows; y < first0+blurred || y > last0-blurred {
				truth[i] = float32(math.NaN())
				continue
			}
			worst = max(worst, d)
		}
	}
	t.Logf("%d of %d voxels are good on both; they differ by at most %.4f of the largest", good, all, worst/peak)
	require.Greater(t, float64(good), 0.8*float64(all))
	require.Less(t, worst/peak, 0.01)
	p, err := trial.NewPulls(noisy, twin.Signal, twin.Variance, 1)
	require.NoError(t, err)
	hold(t, p.Findings("onto"))
	p, err = trial.NewPulls(noisy, truth, twin.Variance, 1)
	require.NoError(t, err)
	hold(t, p.CalibratedFindings("onto, against the truth"))
}

// Cubes whose pixels are not this night's but for a shift are refused, and so are
// contradictions: with a sentence that says what to do.
func TestOntoRefusals(t *testing.T) {
	ctx := t.Context()
	lend := func(recipe string, change func(f *trial.Field)) string {
		f, err := trial.Tiny()
		require.NoError(t, err)
		change(f)
		n, err := f.Plan(ctx, t.TempDir())
		require.NoError(t, err)
		require.NoError(t, n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true}))
		r, err := reduce.LoadRecipe("nominal")
		require.NoError(t, err)
		r.Grid.Frame = recipe
		_, err = n.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: r})
		require.NoError(t, err)
		return n.CubePath(trial.Noisy)
	}
	f, err := trial.Tiny()
	require.NoError(t, err)
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 4, NoTruth: true}))
	notFITS := filepath.Join(t.TempDir(), "cube.fits")
	require.NoError(t, os.WriteFile(notFITS, []byte("no FITS"), 0o644))
	for _, c := range []struct{ cube, frame, want string }{
		{filepath.Join(t.TempDir(), "cube.fits"), "", "grid.onto"},
		{notFITS, "", "grid.onto"},
		{lend("", func(f *trial.Field) { f.Profile.Name = "other" }), "", `of the instrument "other"`},
		{lend("", func(f *trial.Field) { f.Target.RotangDeg += 2 }), "", "is turned against this night's"},
		{lend("", func(f *trial.Field) { f.Target.DecDeg += 0.1 }), "", "shows another field"},
		{lend("", func(f *trial.Field) { f.SetCode("m-sequence", 31, 10) }), "", "has 21 elements"},
		{lend("", func(f *trial.Field) { f.Profile.DMD.Parity = -1 }), "", "parity -1"},
		{lend("barycentric", func(*trial.Field) {}), "observatory", "grid.frame is observatory, but the cube of grid.onto"},
	} {
		r, err := reduce.LoadRecipe("nominal")
		require.NoError(t, err)
		r.Grid.Onto, r.Grid.Frame = c.cube, c.frame
		_, err = night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: r})
		require.ErrorContains(t, err, c.want)
		t.Log(err)
		require.NoError(t, os.RemoveAll(night.Run(trial.Noisy)))
	}
	// The frame is the other cube's where none is asked for.
	r, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	r.Grid.Onto = lend("barycentric", func(*trial.Field) {})
	result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: r})
	require.NoError(t, err)
	require.Equal(t, product.Barycentric, result.Schema.Frame.Name)
	require.NotZero(t, result.Schema.Frame.Factor)
}

// A frame whose header contradicts the target is said: a right ascension in hours, another
// place, another air mass.
func TestPointingWarnings(t *testing.T) {
	ctx := t.Context()
	f, err := trial.Tiny()
	require.NoError(t, err)
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Grid.Refraction = "auto"
	for _, c := range []struct{ key, value, want string }{
		{"RA", "8.22", "degrees in hours"}, {"RA", "12.5", "check ra_deg"}, {"AIRMASS", "2.9", "where site, target and time give"},
	} {
		require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true}))
		setCard(t, night.Frames(trial.Noisy), c.key, c.value)
		result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		require.Len(t, result.Run.Warnings, 1)
		require.Contains(t, result.Run.Warnings[0], c.want)
		require.NoError(t, night.Discard(trial.Noisy))
	}
}

// setCard gives a card of all frames of a folder another number.
func setCard(t *testing.T, folder, key, value string) {
	t.Helper()
	frames, err := filepath.Glob(filepath.Join(folder, "*.fits"))
	require.NoError(t, err)
	for _, path := range frames {
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		at := bytes.Index(data, []byte((key + "        ")[:8]+"="))
		require.Positive(t, at, path)
		copy(data[at+9:at+80], fmt.Appendf(nil, " %20s%-50s", value, ""))
		require.NoError(t, os.WriteFile(path, data, 0o644))
	}
}

// Where no air mass can be computed refraction stays in the cube, which is said.
func TestRefractionWithoutAirmass(t *testing.T) {
	ctx := t.Context()
	f, err := trial.Tiny()
	require.NoError(t, err)
	for name, c := range map[string]struct {
		want   string
		change func(*trial.Field, string)
	}{
		"no times":      {"has no DATE-OBS", func(_ *trial.Field, frames string) { renameCard(t, frames, "DATE-OBS") }},
		"below horizon": {"degrees from the zenith", nil},
	} {
		g := *f
		target := *f.Target
		if c.change == nil {
			target.DecDeg = -f.Profile.Site.LatitudeDeg / math.Abs(f.Profile.Site.LatitudeDeg) * 89
		}
		g.Target = &target
		night, err := g.Plan(ctx, t.TempDir())
		require.NoError(t, err)
		require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true}))
		if c.change != nil {
			c.change(&g, night.Frames(trial.Noisy))
		}
		recipe, err := reduce.LoadRecipe("nominal")
		require.NoError(t, err)
		recipe.Grid.Refraction = "auto"
		result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err, name)
		require.Len(t, result.Degraded, 1, name)
		require.Contains(t, result.Degraded[0], "refraction is left in the cube: no air mass can be computed", name)
		require.Contains(t, result.Degraded[0], c.want, name)
		require.Equal(t, reduce.ExitDegraded, result.Run.Exit)
	}
}

// So does a night whose instrument is calibrated by its own lamps: the light that comes from
// other elements and rows is divided by their response, not by that of the voxel's own.
func TestOntoOfACalibratedNight(t *testing.T) {
	ctx := t.Context()
	f, err := trial.Lamps()
	require.NoError(t, err)
	f.Target.Code.ElementMirrors = 1
	f.Scene.SeeingFWHMArcsec = max(f.Scene.SeeingFWHMArcsec, 1.2)
	first, _, err := f.Pair(ctx, filepath.Join(t.TempDir(), "first"), 51)
	require.NoError(t, err)
	second, err := f.Displaced(1.4, 1.5).Plan(ctx, filepath.Join(t.TempDir(), "second"))
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe(reduce.DefaultRecipe)
	require.NoError(t, err)
	recipe.Grid.Onto = first.CubePath(trial.Noisy)
	cubes := map[string]*trial.Cube{}
	for name, opts := range map[string]rehearse.Options{trial.Noisy: {Seed: 51, NoTruth: true}, trial.Twin: {Seed: 51, Noiseless: true, NoTruth: true}} {
		require.NoError(t, second.Rehearse(ctx, name, opts))
		_, err := second.Reduce(ctx, name, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		cubes[name], err = trial.ReadCube(second.CubePath(name))
		require.NoError(t, err)
	}
	want, err := trial.ReadCube(first.CubePath(trial.Noisy))
	require.NoError(t, err)
	truth, err := want.ReadTruth(first.TruthPath(trial.Noisy))
	require.NoError(t, err)
	low, high := want.Rows, 0
	for i := range truth {
		if want.Good(i) {
			low, high = min(low, i/want.N%want.Rows), max(high, i/want.N%want.Rows)
		}
	}
	for i := range truth {
		if y := i / want.N % want.Rows; y < low+6 || y > high-6 || i%want.N < 3 || i%want.N > want.N-4 {
			truth[i] = float32(math.NaN())
		}
	}
	own, err := trial.NewPulls(want, truth, want.Variance, 1)
	require.NoError(t, err)
	p, err := trial.NewPulls(cubes[trial.Noisy], truth, cubes[trial.Twin].Variance, 1)
	require.NoError(t, err)
	t.Logf("pulls: mean %.4f, std %.4f (of the first night %.4f, %.4f), N = %d", p.All.Mean(), p.All.Std(), own.All.Mean(), own.All.Std(), p.All.N)
	require.InDelta(t, 0, p.All.Mean(), 0.05)
	require.InDelta(t, 1, p.All.Std(), 0.05)
	require.Greater(t, p.All.N, 20000)
}
