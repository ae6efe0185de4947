package combine

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// runAll writes the fakes and combines them into dir/out.
func runAll(t testing.TB, dir string, fakes []*fake, memory int64, workers int) (*Result, error) {
	opts := Options{Out: filepath.Join(dir, "out"), MemoryBytes: memory, Workers: workers}
	for _, f := range fakes {
		f.write(t)
		opts.Runs = append(opts.Runs, f.dir)
	}
	require.NoError(t, os.MkdirAll(opts.Out, 0o755))
	return Run(context.Background(), opts)
}

// offsets of the fakes: of the first element and row from those of the first.
var testOffsets = [][][2]int{
	{{0, 0}, {0, 0}},
	{{0, 0}, {2, -3}},
	{{0, 0}, {-4, 1}, {3, 5}},
	{{0, 0}, {0, 6}, {-1, -6}, {4, 0}},
}

// The mean of every voxel, worked out one by one; the same bytes whatever the memory and
// the workers.
func TestCombineAgainstNaive(t *testing.T) {
	for n, offsets := range testOffsets {
		t.Run(fmt.Sprint(n), func(t *testing.T) {
			rng := rand.New(rand.NewPCG(1, uint64(n)))
			dir := t.TempDir()
			var fakes []*fake
			for i, o := range offsets {
				fakes = append(fakes, newFake(rng, filepath.Join(dir, fmt.Sprint("run", i)), float64(o[0]), float64(o[1]), 5+i, 9-i))
				// The middle of more elements lies further on.
				f := fakes[i]
				f.schema.RADeg, f.schema.DecDeg = fakes[0].schema.Sky(float64(o[0])+float64(f.schema.Elements-1)/2, float64(o[1])+f.schema.RowCenter)
			}
			result, err := runAll(t, dir, fakes, 0, 2)
			require.NoError(t, err)
			got := readFake(t, filepath.Join(dir, "out"))
			require.Equal(t, result.Schema.Axes(), got.schema.Axes())
			j0, y0 := 0, 0
			for _, o := range offsets {
				j0, y0 = min(j0, o[0]), min(y0, o[1])
			}
			compare(t, got, fakes, offsets, j0, y0)
			// The sky is where it was.
			ra, dec := fakes[0].schema.Sky(1, 2)
			ra2, dec2 := got.schema.Sky(float64(1-j0), float64(2-y0))
			require.InDelta(t, ra, ra2, 1e-10)
			require.InDelta(t, dec, dec2, 1e-10)
			// One row at a time.
			least := int64(runtimeBytes + bytesVoxel*got.schema.Elements + 32*len(fakes))
			whole, err := os.ReadFile(filepath.Join(dir, "out", product.CubeFile))
			require.NoError(t, err)
			_, err = runAll(t, dir, fakes, least, 3)
			require.NoError(t, err)
			again, err := os.ReadFile(filepath.Join(dir, "out", product.CubeFile))
			require.NoError(t, err)
			require.True(t, string(whole) == string(again), "the bytes depend on the memory")
			_, err = runAll(t, dir, fakes, least-1, 3)
			require.ErrorContains(t, err, "--memory of")
		})
	}
}

func compare(t *testing.T, got *fake, fakes []*fake, offsets [][2]int, j0, y0 int) {
	good := 0
	for l := range 3 {
		for y := range got.schema.Rows {
			for j := range got.schema.Elements {
				i, _ := got.at(j, y, l)
				want := naive(fakes, offsets, j+j0, y+y0, l)
				require.Equal(t, want.flags, got.flags[i], "element %d, row %d, plane %d", j, y, l)
				require.Equal(t, want.flags&product.FlagNoData != 0, math.IsNaN(float64(got.signal[i])))
				if want.flags&product.FlagNoData != 0 {
					continue
				}
				require.InEpsilon(t, want.variance, got.variance[i], 1e-6)
				require.InDelta(t, want.signal, got.signal[i], 1e-4)
				require.InEpsilon(t, want.scale, got.scale[i], 1e-6)
				if want.flags&product.FlagBad == 0 {
					good++
				}
			}
		}
	}
	require.NotZero(t, good)
}

type naiveVoxel struct {
	signal, variance, scale float64
	flags                   int16
}

// naive is the contract word by word: those that are good, else those with light, else
// the flags of all.
func naive(fakes []*fake, offsets [][2]int, j, y, l int) naiveVoxel {
	var classes [3][]naiveVoxel
	for k, f := range fakes {
		i, there := f.at(j-offsets[k][0], y-offsets[k][1], l)
		if !there {
			continue
		}
		v := naiveVoxel{float64(f.signal[i]), float64(f.variance[i]), float64(f.scale[i]), f.flags[i]}
		class := 2
		if v.flags&product.FlagNoData != 0 {
			class = 0
		} else if v.flags&product.FlagBad != 0 {
			class = 1
		}
		classes[class] = append(classes[class], v)
	}
	for class := 2; class > 0; class-- {
		if len(classes[class]) == 0 {
			continue
		}
		var out naiveVoxel
		total := 0.0
		for _, v := range classes[class] {
			total += 1 / v.variance
			out.flags |= v.flags
		}
		for _, v := range classes[class] {
			share := 1 / v.variance / total
			out.signal += share * v.signal
			out.variance += share * share * v.variance
			out.scale += share * v.scale
		}
		return out
	}
	out := naiveVoxel{flags: product.FlagNoData}
	for _, v := range classes[0] {
		out.flags |= v.flags
	}
	return out
}

// Every pair that cannot be combined is refused, with what differs and the cure.
func TestCombineRefuses(t *testing.T) {
	for _, c := range []struct {
		change func(f *fake)
		want   string
	}{
		{func(f *fake) { f.primary.ProfileName = "other" }, `instruments "tiny" and "other"; combine runs of one instrument`},
		{func(f *fake) { f.unit = "aW m-2 nm-1" }, "units are ct and aW m-2 nm-1; reduce both with the flux calibration"},
		{func(f *fake) { f.cards = []fitsutil.Card{{Key: "SKYTAKEN", Value: true}} }, "sky was subtracted from one of them alone"},
		{func(f *fake) { f.schema.Grid.FirstNM += 0.25 }, "wavelengths differ .*same `grid`"},
		{func(f *fake) { f.schema.Grid.Axis = instrument.Air }, "wavelengths differ .*WAVE and AWAV"},
		{func(f *fake) { f.schema.Grid.Spacing = instrument.Logarithmic }, "WAVE and WAVE-LOG"},
		{func(f *fake) { f.schema.Frame = product.SpectralFrame{Name: product.Barycentric, Factor: 1.0001} }, "frames TOPOCENT and BARYCENT"},
		{func(f *fake) { f.dwell = 60 }, "exposures of 90 s and 60 s; reduce both with the flux"},
		{func(f *fake) { f.schema.RotangDeg += 1 }, `turned against each other by 1 degrees.*grid: \{onto: .*run0/cube.fits\}`},
		{func(f *fake) { f.schema.Parity = -1 }, "parities 1 and -1"},
		{func(f *fake) { f.schema.C1Deg *= 1.5 }, "elements are 0.6 and 0.9 arc seconds apart"},
		{func(f *fake) { f.schema.C2Deg *= 2 }, "rows are 0.28 and 0.56"},
		{func(f *fake) { f.schema.RowCenter += 0.5 }, `do not coincide: the first of .* is element .*, row -?\d\.50 of .*onto`},
		{func(f *fake) { f.schema.DecDeg += 1 }, "do not overlap; combine runs of one field"},
		{func(f *fake) { f.schema.RADeg += 180; f.schema.DecDeg *= -1 }, "do not overlap"},
	} {
		t.Run(c.want, func(t *testing.T) {
			rng := rand.New(rand.NewPCG(2, 2))
			dir := t.TempDir()
			a, b := newFake(rng, filepath.Join(dir, "run0"), 0, 0, 5, 9), newFake(rng, filepath.Join(dir, "run1"), 1, 2, 5, 9)
			c.change(b)
			_, err := runAll(t, dir, []*fake{a, b}, 0, 1)
			require.Error(t, err)
			require.Regexp(t, c.want, err.Error())
			require.Contains(t, err.Error(), "run1")
		})
	}
}

func TestCombineRefusesRuns(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	dir := t.TempDir()
	a, b := newFake(rng, filepath.Join(dir, "run0"), 0, 0, 5, 9), newFake(rng, filepath.Join(dir, "run1"), 1, 2, 5, 9)
	_, err := runAll(t, dir, []*fake{a}, 0, 1)
	require.ErrorContains(t, err, "name two or more")
	_, err = runAll(t, dir, []*fake{a, b, a}, 0, 1)
	require.ErrorContains(t, err, "hold the same light; name each run once")
	_, err = runAll(t, dir, []*fake{a, b}, 0, 1)
	require.NoError(t, err)
	_, err = Run(context.Background(), Options{Runs: []string{a.dir, filepath.Join(dir, "out")}, Out: t.TempDir()})
	require.ErrorContains(t, err, "is made of 2 runs already; combine the runs themselves")
	_, err = Run(context.Background(), Options{Runs: []string{a.dir, filepath.Join(dir, "nowhere")}, Out: t.TempDir()})
	require.ErrorIs(t, err, os.ErrNotExist)
	require.ErrorContains(t, err, "folders that reduce wrote")
	require.NoError(t, os.Remove(filepath.Join(b.dir, product.LedgerFile)))
	_, err = Run(context.Background(), Options{Runs: []string{a.dir, b.dir}, Out: t.TempDir()})
	require.ErrorContains(t, err, product.LedgerFile)
}

// What is recorded: runs, frames, light, warnings; a run that is not whole says so.
func TestCombineRecords(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	dir := t.TempDir()
	a, b := newFake(rng, filepath.Join(dir, "run0"), 0, 0, 5, 9), newFake(rng, filepath.Join(dir, "run1"), 1, -2, 5, 9)
	for i := range a.signal {
		a.signal[i], b.signal[i] = 1000, 1200
		a.flags[i], b.flags[i] = 0, 0
		a.variance[i], b.variance[i] = 1, 1
	}
	chi2 := 1.4
	b.exit, b.primary.RecipeSHA = 3, "r2"
	a.warnings, a.chi2 = []string{"frame f00007.fits is striped"}, &chi2
	result, err := runAll(t, dir, []*fake{a, b}, 0, 1)
	require.NoError(t, err)
	require.Len(t, result.Degraded, 1)
	require.Contains(t, result.Degraded[0], "run1 is not whole itself")
	require.Equal(t, product.ExitDegraded, result.Run.Exit)
	require.Len(t, result.Run.Warnings, 4)
	require.Contains(t, result.Run.Warnings[1], "times the light of")
	require.Contains(t, result.Run.Warnings[2], "run0: frame f00007.fits is striped")
	require.Contains(t, result.Run.Warnings[3], "run0: its dark columns show 1.40 times the squares")
	out := filepath.Join(dir, "out")
	f, err := fitsutil.Open(filepath.Join(out, product.CubeFile))
	require.NoError(t, err)
	defer f.Close() // only read from
	list, err := product.ReadMembers(f)
	require.NoError(t, err)
	require.Equal(t, result.Run.Combined, list)
	require.Equal(t, "../run1", list[1].Path)
	require.Equal(t, []int{0, 2, 1, 0}, []int{list[0].Element, list[0].Row, list[1].Element, list[1].Row})
	require.InDelta(t, 1.2, list[1].Light, 1e-9)
	primary := f.HDUs()[0].Header
	for key, want := range map[string]string{"RECSHA": "several", "PROFSHA": "p"} {
		have, err := primary.Str(key)
		require.NoError(t, err)
		require.Equal(t, want, have)
	}
	frames, err := primary.Int("NFRAMES")
	require.NoError(t, err)
	require.EqualValues(t, 30, frames)
	l, err := product.ReadLedger(filepath.Join(out, product.LedgerFile))
	require.NoError(t, err)
	require.Equal(t, []string{"1/f00001.fits", "2/f00001.fits"}, []string{l[0].File, l[1].File})
	run, err := product.ReadRun(filepath.Join(out, product.RunFile))
	require.NoError(t, err)
	require.Equal(t, list, run.Combined)
	page, err := os.ReadFile(filepath.Join(out, product.ReportFile))
	require.NoError(t, err)
	require.Contains(t, string(page), "mean of 2 runs")
}
