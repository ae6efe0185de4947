package reduce_test

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// stuckNights are fields whose device has 30 mirrors that do not move, on bright stars
// some of them.
var stuckNights = []struct {
	name   string
	make   func() (*trial.Field, error)
	change func(f *trial.Field)
	faults rehearse.Options
	nights int
	lamps  bool
}{
	{name: "square", make: trial.Square, nights: 2},
	{name: "diagonal", make: trial.Diagonal, nights: 2},
	{name: "elements of one mirror", make: func() (*trial.Field, error) { return trial.Struckable(63, 16) }, nights: 1},
	{name: "square, no all-off frames", make: trial.Square, nights: 1, change: func(f *trial.Field) { f.Target.AllOffEvery = 0 }},
	{name: "diagonal, faults", make: trial.Diagonal, nights: 2, faults: rehearse.Options{Faults: []rehearse.Fault{
		{Name: rehearse.Drift, Size: 0.02}, {Name: rehearse.Lost, Size: 2}, {Name: rehearse.Cosmic, Size: 0.3},
	}}},
	{name: "calibrated by its lamps", make: trial.Lamps, nights: 1, lamps: true},
}

// Where light of stuck mirrors is missing the pulls are those of any other voxel, against
// the truth of an element whose mirrors all move; the night is whole.
func TestStuckMirrors(t *testing.T) {
	for i, c := range stuckNights {
		t.Run(c.name, func(t *testing.T) {
			ctx := context.Background()
			f, err := c.make()
			require.NoError(t, err)
			if c.change != nil {
				c.change(f)
			}
			require.NoError(t, f.Stick(uint64(1+i), 30))
			night, err := f.Plan(ctx, t.TempDir())
			require.NoError(t, err)
			names := []string{trial.Noisy}
			for k := range c.nights {
				opts := c.faults
				if opts.Seed = uint64(31 + 10*i + k); k > 0 {
					names, opts.NoTruth = append(names, fmt.Sprint(k)), true
				}
				require.NoError(t, night.Rehearse(ctx, names[k], opts))
				recipe, err := reduce.LoadRecipe(reduce.DefaultRecipe)
				require.NoError(t, err)
				if !c.lamps {
					recipe.Arc.Use, recipe.Flat.Use = "off", "off"
				}
				result, err := night.Reduce(ctx, names[k], reduce.Options{Cube: true, Recipe: recipe})
				require.NoError(t, err)
				require.Empty(t, result.Degraded)
				require.Zero(t, result.Run.Exit)
				for _, w := range result.Run.Warnings {
					t.Log("warning:", w)
				}
				if c.lamps {
					checkGeometry(t, night, result.Run.Calibration)
					checkFlatDepth(t, result.Run.Calibration.FlatDepth)
				}
			}
			pulls, err := night.StuckPullsOf(1, names...)
			require.NoError(t, err)
			t.Logf("above 5 sigma: %d pulls, mean %.4f, standard deviation %.4f", pulls.Bright.N, pulls.Bright.Mean(), pulls.Bright.Std())
			hold(t, pulls.Findings(c.name, false))
			small, err := night.StuckPullsOf(0.88, names...)
			require.NoError(t, err)
			require.False(t, trial.AllHold(small.Findings(c.name, false)[:2]), "VARIANCE too small passes")
		})
	}
}

// Rows that no stuck mirror's light reaches have the same bytes with the list of stuck
// mirrors and without; where light is missing, without the list it is.
func TestStuckMirrorsLeaveOthersAlone(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Square()
	require.NoError(t, err)
	dir := t.TempDir()
	unaware, err := f.Plan(ctx, filepath.Join(dir, "unaware"))
	require.NoError(t, err)
	require.NoError(t, f.Stick(4, 12))
	night, err := f.Plan(ctx, filepath.Join(dir, "aware"))
	require.NoError(t, err)
	_, err = night.Make(ctx, trial.Noisy, rehearse.Options{Seed: 5})
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	// One worker and strips of a few rows give the same bytes.
	again := filepath.Join(dir, "again")
	require.NoError(t, os.Mkdir(again, 0o755))
	_, err = reduce.Run(ctx, reduce.Options{
		Night: night.Frames(trial.Noisy), Sequence: night.SequencePath(), Out: again, Recipe: recipe, Cube: true, Workers: 1, MemoryBytes: 60 << 20,
	})
	require.NoError(t, err)
	requireSameFile(t, night.CubePath(trial.Noisy), filepath.Join(again, product.CubeFile))
	require.NoError(t, os.MkdirAll(unaware.Run(trial.Noisy), 0o755))
	_, err = reduce.Run(ctx, reduce.Options{
		Night: night.Frames(trial.Noisy), Sequence: unaware.SequencePath(), Out: unaware.Run(trial.Noisy), Recipe: recipe, Cube: true,
	})
	require.NoError(t, err)
	with, err := trial.ReadCube(night.CubePath(trial.Noisy))
	require.NoError(t, err)
	without, err := trial.ReadCube(unaware.CubePath(trial.Noisy))
	require.NoError(t, err)
	require.Equal(t, len(without.Signal), len(with.Signal))
	same, other := 0, 0
	lacking := trial.Lacking(night.Seq)
	for i, v := range with.Signal {
		j, y := i%with.N, i/with.N%with.Rows
		if stuckDistance(night.Seq, j, y) > 13 { // spot, trace and eight rows of a stencil
			same++
			if math.Float32bits(v) != math.Float32bits(without.Signal[i]) || math.Float32bits(with.Variance[i]) != math.Float32bits(without.Variance[i]) || with.Flags[i] != without.Flags[i] {
				t.Fatalf("element %d, row %d: %g, without the list %g", j, y, v, without.Signal[i])
			}
		}
		if lacking[y][j] && v != without.Signal[i] && with.Variance[i] > without.Variance[i] {
			other++
		}
	}
	require.Greater(t, same, 100_000)
	require.Greater(t, other, 5_000)
}

func requireSameFile(t *testing.T, a, b string) {
	t.Helper()
	first, err := os.ReadFile(a)
	require.NoError(t, err)
	second, err := os.ReadFile(b)
	require.NoError(t, err)
	require.True(t, bytes.Equal(first, second), "%s and %s differ", a, b)
}

// stuckDistance is how many rows a row of an element is from its nearest stuck mirror.
func stuckDistance(seq *sequence.Sequence, j, y int) float64 {
	least := math.Inf(1)
	p := seq.Profile
	for _, m := range seq.StuckMirrors() {
		if m.Element == j {
			least = min(least, math.Abs(float64(y)-p.Spectrograph.YCenterPx-p.Spectrograph.WStepPx*(float64(m.W)-p.WCenter())))
		}
	}
	return least
}

// A wrong list: a mirror that is dead and not listed, and one that is listed and moves,
// are named by the coded flat; a right list is not doubted.
func TestWrongListOfStuckMirrors(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Lamps()
	require.NoError(t, err)
	dir := t.TempDir()
	element := func(j int) int { // its first column
		return (f.Profile.DMD.Columns-2*f.Elements())/2 + 2*j
	}
	always := instrument.StuckMirror{Column: element(20), Row: 30}
	truly := []instrument.StuckMirror{always, {Column: element(9), Row: 18}, {Column: element(33) + 1, Row: 41, On: true}}
	require.NoError(t, f.Profile.SetStuck("stuck.csv", truly))
	night, err := f.Plan(ctx, filepath.Join(dir, "true"))
	require.NoError(t, err)
	result, err := night.Make(ctx, trial.Noisy, rehearse.Options{Seed: 8, NoTruth: true})
	require.NoError(t, err)
	require.Empty(t, doubts(result), "of a right list")

	require.NoError(t, f.Profile.SetStuck("stuck.csv", []instrument.StuckMirror{always, {Column: element(14), Row: 25}}))
	wrong, err := f.Plan(ctx, filepath.Join(dir, "wrong"))
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe(reduce.DefaultRecipe)
	require.NoError(t, err)
	result, err = reduce.Run(ctx, reduce.Options{
		Night: night.Frames(trial.Noisy), Sequence: wrong.SequencePath(), Out: wrong.Run(trial.Noisy), Recipe: recipe, Cube: true,
	})
	require.NoError(t, err)
	said := doubts(result)
	require.Len(t, said, 1)
	t.Log(said[0])
	require.Regexp(t, `element 9 lacks the light of [01]\.\d mirrors more at w = 1[789]`, said[0])
	require.Regexp(t, `element 14 has the light of [01]\.\d mirrors more at w = 2[456]`, said[0])
	require.Regexp(t, `element 33 lacks the light of [01]\.\d mirrors more at w = 4[012]`, said[0])
	require.NotContains(t, said[0], "element 20")
}

func doubts(result *reduce.Result) []string {
	var said []string
	for _, w := range result.Run.Warnings {
		if strings.Contains(w, "list of stuck mirrors") {
			said = append(said, w)
		}
	}
	return said
}
