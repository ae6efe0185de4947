package reduce_test

import (
	"context"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// forecastOf tells the target of the scene.
func forecastOf(f *trial.Field, rows sequence.SourceRows) {
	f.Target.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: f.Scene.SeeingFWHMArcsec, Sources: f.Scene.Sources, Sky: f.Scene.Sky, Aim: sequence.AimFaintest,
	}
	f.Target.FromSources = &rows
}

// Sentinel rows that plan chooses on the one star of a sky that dark columns cannot measure by
// measure the throughput within its error, in both mountings, the field beside the middle.
func TestNightOfPickedSentinels(t *testing.T) {
	for _, field := range besides {
		t.Run(field.name, func(t *testing.T) {
			ctx := context.Background()
			f, err := field.make()
			require.NoError(t, err)
			f.Show(trial.Skies()[3])
			f.Scene.Sky.ContinuumABArcsec2 = ptr(21.0)
			forecastOf(f, sequence.SourceRows{Sentinels: 1})
			_, summary, err := plan.Build(ctx, f.Target, f.Profile)
			require.NoError(t, err)
			require.Len(t, summary.Picked, 1, summary.Warnings)
			t.Log(summary.Picked[0])
			night, err := f.Plan(ctx, t.TempDir())
			require.NoError(t, err)
			require.Len(t, night.Seq.Target.SentinelRows, 1)
			require.Nil(t, night.Seq.Target.FromSources)
			require.NoError(t, night.Rehearse(ctx, "a", rehearse.Options{Seed: 5, NoTruth: true, Faults: drifts()}))
			run := reduceAuto(t, night, "auto").Run
			c, err := night.Throughput("a")
			require.NoError(t, err)
			t.Logf("%+v %+v", *c, run.Throughput.Methods)
			require.Len(t, run.Throughput.Methods, 2)
			// 62 differences: 5 standard errors of an rms are 45 %.
			require.InEpsilon(t, c.Predicted, c.Measured, 0.45)
			require.Less(t, run.Throughput.Methods[0].Error, run.Throughput.Methods[1].Error/2)
		})
	}
}

// A star that saturates voids voxels and ends in a product that is not whole; with the patch
// that plan chooses nothing saturates and the product is.
func TestNightOfPickedPatches(t *testing.T) {
	for _, field := range fields {
		t.Run(field.name, func(t *testing.T) {
			ctx := context.Background()
			f, err := field.make()
			require.NoError(t, err)
			for i := range f.Scene.Sources {
				if f.Scene.Sources[i].Kind == rehearse.KindStar {
					f.Scene.Sources[i].ABMag = ptr(*f.Scene.Sources[i].ABMag + 3)
				}
			}
			f.Scene.Sources[2].ABMag = ptr(*f.Scene.Sources[2].ABMag - 12)
			for _, patches := range []int{0, 1} {
				forecastOf(f, sequence.SourceRows{Patches: patches})
				_, summary, err := plan.Build(ctx, f.Target, f.Profile)
				require.NoError(t, err)
				require.Len(t, summary.Picked, patches, summary.Warnings)
				night, err := f.Plan(ctx, t.TempDir())
				require.NoError(t, err)
				require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 8}))
				result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
				require.NoError(t, err)
				cube, err := trial.ReadCube(night.CubePath(trial.Noisy))
				require.NoError(t, err)
				saturated := 0
				for _, flags := range cube.Flags {
					if flags&product.FlagSaturated != 0 {
						saturated++
					}
				}
				t.Logf("%d patches: %d voxels SATURATED, %v, %v, %v", patches, saturated, result.Degraded, summary.Picked, summary.Warnings)
				if patches == 0 {
					require.Positive(t, saturated)
					require.Contains(t, strings.Join(summary.Warnings, "\n"), "will saturate")
					continue
				}
				require.Equal(t, 2, summary.Picked[0].Source)
				require.Zero(t, saturated)
				require.Empty(t, result.Degraded)
			}
		})
	}
}
