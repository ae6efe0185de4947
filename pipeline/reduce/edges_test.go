package reduce_test

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// Without dark columns enough, cosmic rays are found in single frames, in a coded night
// as well as in a slit scan; errors hold, and fewer hits are needed than were drawn.
func TestCosmicNightWithoutDarkColumns(t *testing.T) {
	for name, set := range map[string]func(f *trial.Field){
		"coded":      func(f *trial.Field) { f.SetCode("m-sequence", 63, 4) },
		"slit scan":  func(f *trial.Field) { f.SetCode("slit-scan", 47, 0) },
		"two a slot": func(f *trial.Field) { f.SetCode("m-sequence", 31, 0); f.Target.Code.Cycles = 2 },
	} {
		t.Run(name, func(t *testing.T) {
			f, err := trial.Square()
			require.NoError(t, err)
			set(f)
			f.Profile.DMD.Columns = 130
			trial.TwoAmplifiers(&f.Profile.Detector, 240, 48)
			f.Profile.Spectrograph.XCenterPx = 119.7
			ctx := context.Background()
			n, err := f.Plan(ctx, t.TempDir())
			require.NoError(t, err)
			recipe, err := reduce.LoadRecipe("nominal")
			require.NoError(t, err)
			recipe.Repair.Use = "auto"
			opts := reduce.Options{Cube: true, Recipe: recipe}
			require.NoError(t, n.Rehearse(ctx, trial.Twin, rehearse.Options{Seed: 1, Noiseless: true, NoTruth: true}))
			r, err := n.Reduce(ctx, trial.Twin, opts)
			require.NoError(t, err)
			require.Zero(t, *r.Run.Quality.Hits)
			require.NoError(t, n.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 1, Faults: []rehearse.Fault{{Name: rehearse.Cosmic, Size: 0.5}}}))
			strikes, err := n.TrueStrikes(trial.Noisy)
			require.NoError(t, err)
			require.Greater(t, len(strikes), 200)
			r, err = n.Reduce(ctx, trial.Noisy, opts)
			require.NoError(t, err)
			require.InEpsilon(t, len(strikes), *r.Run.Quality.Hits, 0.05)
			pulls, _, err := n.PullsOf(1)
			require.NoError(t, err)
			for _, f := range pulls.FaultyFindings(name)[:2] {
				t.Log(f)
				require.True(t, f.OK, f)
			}
		})
	}
}
