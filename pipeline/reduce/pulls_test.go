package reduce_test

import (
	"context"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
)

// fields are the small instruments: square with two amplifiers and overscan, and
// diagonal with one amplifier, without.
var fields = []struct {
	name string
	make func() (*trial.Field, error)
}{{"square", trial.Square}, {"diagonal", trial.Diagonal}}

// hold fails the test for every finding that does not, and logs all.
func hold(t *testing.T, list []trial.Finding) {
	t.Helper()
	require.NotEmpty(t, list)
	for _, f := range list {
		t.Log(f)
		if !f.OK {
			t.Error(f)
		}
	}
}

// Of a clean night the pulls are normal, over all good voxels and in each decile
// of the pixels' counts; and the same check refuses a VARIANCE that is a tenth too
// small, so that it can fail.
func TestPulls(t *testing.T) {
	for i, field := range fields {
		t.Run(field.name, func(t *testing.T) {
			f, err := field.make()
			require.NoError(t, err)
			night, result, err := f.Pair(context.Background(), t.TempDir(), uint64(11+i))
			require.NoError(t, err)
			require.Empty(t, result.Degraded)
			pulls, cube, err := night.PullsOf(1)
			require.NoError(t, err)
			hold(t, pulls.Findings(field.name))
			hold(t, trial.GoodFindings(field.name, cube, night.Seq, 0.6))
			q := result.Run.Quality
			require.InDelta(t, goodFraction(cube), q.GoodFraction, 1e-12, "run.json's figure")
			require.GreaterOrEqual(t, q.CoveredGoodFraction, 0.99)
			require.NotNil(t, q.DarkChi2Heldout)
			// 16 dark columns of 8000 to 10000 pixels: 5 standard errors are 0.02.
			require.InDelta(t, 1, *q.DarkChi2Heldout, 0.02, "dark columns")

			small, _, err := night.PullsOf(0.9)
			require.NoError(t, err)
			require.False(t, trial.AllHold(small.Findings(field.name)), "VARIANCE a tenth too small passes")
		})
	}
}

func goodFraction(c *trial.Cube) float64 {
	good := 0
	for i := range c.Flags {
		if c.Good(i) {
			good++
		}
	}
	return float64(good) / float64(len(c.Flags))
}

// With 0.3 e of sky a sample and 1 e of read noise half of all samples are
// negative: a variance that clipped them would be up to 30 % too large.
func TestPullsOfAFaintNight(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	night, err := f.FaintPair(context.Background(), t.TempDir(), 21)
	require.NoError(t, err)
	pulls, _, err := night.PullsOf(1)
	require.NoError(t, err)
	hold(t, pulls.Findings("faint night"))
	run, err := product.ReadRun(filepath.Join(night.Run(trial.Noisy), product.RunFile))
	require.NoError(t, err)
	require.NotNil(t, run.Quality.DarkChi2Heldout)
	// As above, but each pixel's variance scatters by a sixth or so: its inverse is
	// 1.03 and more in the mean, which the figure must not show.
	require.InDelta(t, 1, *run.Quality.DarkChi2Heldout, 0.02, "dark columns")
	small, _, err := night.PullsOf(0.9)
	require.NoError(t, err)
	require.False(t, trial.AllHold(small.Findings("faint night")), "VARIANCE a tenth too small passes")
}

// The slit scan's variances come from smoothed light: its pulls are normal as well.
func TestPullsOfASlitScan(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	f.SetCode("slit-scan", 47, 0)
	night, _, err := f.Pair(context.Background(), t.TempDir(), 5)
	require.NoError(t, err)
	pulls, _, err := night.PullsOf(1)
	require.NoError(t, err)
	hold(t, pulls.Findings("slit scan"))
}

// The scatter over seeds is what VARIANCE says, element voxel by element voxel. In
// the tests with 20 seeds, `make validate` takes 200.
func TestScatterOverSeeds(t *testing.T) {
	f, err := trial.Tiny()
	require.NoError(t, err)
	s, err := f.MeasureScatter(context.Background(), t.TempDir(), 20, 1000)
	require.NoError(t, err)
	hold(t, s.Findings("tiny field", 1))
	require.False(t, trial.AllHold(s.Findings("tiny field", 0.9)), "VARIANCE a tenth too small passes")
	require.GreaterOrEqual(t, s.Findings("tiny field", 1)[0].N, 3000)
}
