package reduce_test

import (
	"context"
	"fmt"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Of codes that are no S-matrices each element has a variance of its own: pulls of clean
// nights, in each decile of the counts. A VARIANCE a tenth too small is refused.
func TestPullsOfSparseCodes(t *testing.T) {
	for _, family := range []string{"singer", "singer-complement"} {
		t.Run(family, func(t *testing.T) {
			f, err := trial.Square()
			require.NoError(t, err)
			f.SetCode(family, 73, 26)
			night, result, err := f.Pair(context.Background(), t.TempDir(), 5)
			require.NoError(t, err)
			require.Empty(t, result.Degraded)
			pulls, cube, err := night.PullsOf(1)
			require.NoError(t, err)
			hold(t, pulls.Findings(family))
			hold(t, trial.GoodFindings(family, cube, night.Seq, 0.6))
			// 26 dark columns of 9984 pixels: 5 standard errors are 0.014.
			require.InDelta(t, 1, *result.Run.Quality.DarkChi2Heldout, 0.02, "dark columns")
			small, _, err := night.PullsOf(0.9)
			require.NoError(t, err)
			require.False(t, trial.AllHold(small.Findings(family)), "VARIANCE a tenth too small passes")
		})
	}
}

// Lost frames, exchanged ones and cosmic rays are repaired with a sparse code too, stars
// being three magnitudes brighter than usual: in the frames that show one the noise is
// several times that of the others. That no error scale is measured is said.
func TestRepairsOfASparseCode(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Square()
	require.NoError(t, err)
	f.SetCode("singer", 73, 26)
	f.Brighten(3)
	n, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	_, err = n.Make(ctx, trial.Twin, rehearse.Options{Seed: 5, Noiseless: true, NoTruth: true})
	require.NoError(t, err)
	require.NoError(t, n.RehearseFaults(ctx, trial.Noisy, rehearse.Options{Seed: 5}))
	clean, err := n.Correct(ctx, trial.Noisy, "auto", "auto")
	require.NoError(t, err)
	// Of 208 x 48 pixels and 73 samples each, one in 1e4 may be taken for struck.
	require.Less(t, *clean.Run.Quality.Hits, 73, "samples of a clean night taken for struck")

	require.NoError(t, n.Discard(trial.Noisy))
	require.NoError(t, n.RehearseFaults(ctx, trial.Noisy, rehearse.Options{Seed: 5}, "lost=3", "mislabel=4", "cosmic=1"))
	result, err := n.Correct(ctx, trial.Noisy, "auto", "auto")
	require.NoError(t, err)
	pulls, _, err := n.PullsOf(1)
	require.NoError(t, err)
	hold(t, pulls.FaultyFindings("lost, exchanged and struck"))
	require.Empty(t, result.Degraded)
	q := result.Run.Quality
	require.Equal(t, 3, q.Lost)
	// 1 in 1000 of 700 000 samples are struck, by 1500 e in the median; most stand out.
	require.Greater(t, *q.Hits, 500)
	require.Nil(t, q.ErrorScale)
	warnings := strings.Join(result.Run.Warnings, "\n")
	require.Contains(t, warnings, "no error scale is measured: the singer code is no S-matrix")
	require.Equal(t, 4, strings.Count(warnings, "but shows the mask of step"), warnings)
	require.NotEqual(t, reduce.ExitDegraded, result.Run.Exit)
	fmt.Fprintln(t.Output(), warnings)
}
