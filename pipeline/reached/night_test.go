package reached_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// night plans one of the trial's plans: lines of a nebula at 12 places, bands of four stars.
func night(t *testing.T, plan int, change func(*trial.Field)) *trial.Night {
	t.Helper()
	f, err := trial.ForecastPlans()[plan].Field()
	require.NoError(t, err)
	if change != nil {
		change(f)
	}
	n, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	return n
}

func reduced(t *testing.T, n *trial.Night, name string, seed uint64) *product.Forecast {
	t.Helper()
	r, err := n.Make(context.Background(), name, rehearse.Options{Seed: seed, NoTruth: true})
	require.NoError(t, err)
	require.NotNil(t, r.Run.Forecast, r.Run.Warnings)
	return r.Run.Forecast
}

// Nights as forecast reach the forecast's S/N within 5 %, in the mean over lines and over
// bands of three plans and four seeds; so do their light and their noise by themselves, and
// the errors of the light are what the light scatters by. Limits are the 5 % and five standard
// errors, which are less.
func TestReachedAsForecast(t *testing.T) {
	for _, plan := range []int{2, 3, 9} { // Legendre in two cycles, twin primes, Singer's on the diagonal device
		n := night(t, plan, nil)
		ratios, lights, noises, pulls := map[bool]*trial.Moments{}, map[bool]*trial.Moments{}, map[bool]*trial.Moments{}, map[bool]*trial.Moments{}
		for _, m := range []map[bool]*trial.Moments{ratios, lights, noises, pulls} {
			m[false], m[true] = new(trial.Moments), new(trial.Moments)
		}
		words := 0
		for seed := range uint64(4) {
			f := reduced(t, n, string(rune('a'+seed)), 40+seed)
			require.Equal(t, f.Steps, f.Frames)
			require.InDelta(t, float64(f.Cycles), f.CyclesReached, 1e-9)
			for _, w := range f.Wanted {
				line := strings.HasPrefix(w.Name, "line")
				require.InDelta(t, 1, w.Good, 1e-9)
				require.InDelta(t, 1, *w.TimeRatio, 1e-6)
				require.InEpsilon(t, *w.Ratio, *w.TimeRatio**w.LightRatio / *w.NoiseRatio, 1e-9)
				ratios[line].Add(*w.Ratio)
				lights[line].Add(*w.LightRatio)
				noises[line].Add(*w.NoiseRatio)
				pulls[line].Add((*w.LightRatio - 1) / *w.LightRatioError)
				if as := w.Why == "as forecast, within the errors"; as {
					require.InDelta(t, 1, *w.Ratio, 0.05, w.Name)
				} else if !strings.HasSuffix(w.Why, "which its own error explains (S/N × "+fmt.Sprintf("%.2f)", *w.LightRatio)) {
					words++
				}
			}
		}
		for line, m := range ratios {
			name := trial.ForecastPlans()[plan].Name
			for what, x := range map[string]*trial.Moments{"S/N": m, "light": lights[line], "noise": noises[line]} {
				five := 5 * x.Std() / math.Sqrt(float64(x.N))
				t.Logf("%s, line %v: %s %.4f, five standard errors %.4f, N = %d", name, line, what, x.Mean(), five, x.N)
				require.Less(t, five, 0.05)
				require.InDelta(t, 1, x.Mean(), 0.05)
			}
			p := pulls[line]
			// The standard error of a standard deviation is 1/sqrt(2N).
			limit := max(0.1, 5/math.Sqrt(2*float64(p.N)))
			t.Logf("%s, line %v: pulls of the light %.3f +- %.3f", name, line, p.Mean(), p.Std())
			require.InDelta(t, 1, p.Std(), limit)
		}
		require.Less(t, words, ratios[true].N/10, "what is as forecast is said to be something else")
	}
}

// Of two cycles one is lost: what was lost is named, S/N falls by the root of 2, and neither
// light nor noise is said to be off. So it is if one cycle was not asked for.
func TestLostCycle(t *testing.T) {
	n := night(t, 2, nil)
	require.NoError(t, n.Rehearse(context.Background(), "a", rehearse.Options{Seed: 3, NoTruth: true}))
	one, err := n.Reduce(context.Background(), "a", reduce.Options{Cube: true, Cycles: []int{2}})
	require.NoError(t, err)
	require.NoError(t, os.RemoveAll(n.Run("a")))
	for _, i := range n.Seq.StepsOf(sequence.Science) {
		if n.Seq.Steps[i].Cycle == 1 {
			require.NoError(t, os.Remove(filepath.Join(n.Frames("a"), rehearse.FrameFile(i+1))))
		}
	}
	lost, err := n.Reduce(context.Background(), "a", reduce.Options{Cube: true})
	require.NoError(t, err)
	for words, run := range map[string]*product.Forecast{"59 of 118 frames were lost": lost.Run.Forecast, "1 of 2 cycles was reduced": one.Run.Forecast} {
		require.NotNil(t, run)
		require.Equal(t, 59, run.Frames)
		require.InDelta(t, 1, run.CyclesReached, 1e-9)
		require.Contains(t, run.Notes[0], words)
		ratio := new(trial.Moments)
		for _, w := range run.Wanted {
			require.True(t, strings.HasPrefix(w.Why, words+" (S/N × 0.7"), w.Why)
			require.InDelta(t, math.Sqrt(0.5), *w.TimeRatio, 0.01)
			require.InDelta(t, 1, *w.NoiseRatio, 0.05)
			ratio.Add(*w.Ratio)
		}
		require.InDelta(t, math.Sqrt(0.5), ratio.Mean(), 0.05)
	}
}

// Sources of half the light under the forecast's sky: the ratio is half, and it is the light
// that is said to be less, not the noise to be more.
func TestFainterThanForecast(t *testing.T) {
	n := night(t, 2, func(f *trial.Field) {
		f.Target.Forecast.Sources = slices.Clone(f.Target.Forecast.Sources)
		for i := range f.Target.Forecast.Sources {
			f.Target.Forecast.Sources[i].Lines = slices.Clone(f.Target.Forecast.Sources[i].Lines)
		}
		for i := range f.Scene.Sources {
			s := &f.Scene.Sources[i]
			mag := *s.ABMag + 2.5*math.Log10(2)
			s.ABMag = &mag
			for k := range s.Lines {
				s.Lines[k].FluxWM2 /= 2
			}
		}
	})
	f := reduced(t, n, "a", 8)
	light := new(trial.Moments)
	for _, w := range f.Wanted {
		require.Less(t, *w.Ratio, 0.85, w.Name)
		require.Less(t, *w.NoiseRatio, 1.02, w.Name)
		require.Contains(t, w.Why, "the source is fainter than forecast")
		require.NotContains(t, w.Why, "the noise is 1.")
		light.Add(*w.LightRatio)
	}
	require.InDelta(t, 0.5, light.Mean(), 5*light.Std()/math.Sqrt(float64(light.N)))
	require.InDelta(t, 1, f.Sky.Value, max(0.03, 5*f.Sky.Error))
	require.Contains(t, strings.Join(f.Notes, "\n"), "is alike 0.5")
}

// A sky four times as bright as forecast, in faint light: its light is taken off, so that the light
// wanted is as forecast; the noise is larger, and the sky is named for it.
func TestBrighterSky(t *testing.T) {
	n := night(t, 2, func(f *trial.Field) {
		sky := *f.Scene.Sky.ContinuumABArcsec2 - 2.5*math.Log10(4)
		f.Scene.Sky.ContinuumABArcsec2, f.Scene.Sky.Lines = &sky, slices.Clone(f.Scene.Sky.Lines)
		for i := range f.Scene.Sky.Lines {
			f.Scene.Sky.Lines[i].FluxWM2Arcsec2 *= 4
		}
	})
	f := reduced(t, n, "a", 9)
	require.InDelta(t, 4, f.Sky.Value, 0.2)
	noisier := 0
	for _, w := range f.Wanted {
		require.Less(t, math.Abs(*w.LightRatio-1), 0.05+5**w.LightRatioError, w.Name)
		if *w.NoiseRatio > 1.05 {
			noisier++
			require.Contains(t, w.Why, "the sky is ")
		}
	}
	require.Greater(t, noisier, len(f.Wanted)/2)
}

// What does not make the cube other light makes no other comparison: without its sky, in
// units of flux, without refraction, on another grid.
func TestOtherCubes(t *testing.T) {
	f, err := trial.Airy(false)
	require.NoError(t, err)
	dir := t.TempDir()
	flux, err := f.StarNight(context.Background(), filepath.Join(dir, "star"), 11.5, 1.15, 8)
	require.NoError(t, err)
	star := 0
	middle := f.Profile.Grid.WavelengthNM(float64(f.Profile.Grid.Count) / 2)
	f.Target.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: f.Scene.SeeingFWHMArcsec, Sources: f.Scene.Sources, Sky: f.Scene.Sky, Atmosphere: f.Scene.Atmosphere, Aim: sequence.AimFaintest,
		Wanted: []sequence.Wanted{{Name: "star", Source: &star, BandNM: []float64{middle - 5, middle + 5}}},
	}
	n, err := f.Plan(context.Background(), dir)
	require.NoError(t, err)
	require.NoError(t, n.Rehearse(context.Background(), "a", rehearse.Options{Seed: 9, NoTruth: true}))
	reached := func(change func(*reduce.Recipe)) *product.Forecast {
		require.NoError(t, os.RemoveAll(n.Run("a")))
		recipe, err := f.OnSkyRecipe(reduce.SkyRecipe{Use: "off"}, reduce.FluxRecipe{Use: "off"})
		require.NoError(t, err)
		change(recipe)
		r, err := n.Reduce(context.Background(), "a", reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		require.NotNil(t, r.Run.Forecast, r.Run.Warnings)
		return r.Run.Forecast
	}
	plain := reached(func(*reduce.Recipe) {}).Wanted[0]
	t.Logf("plain %.4f %.4f %.4f", *plain.Ratio, *plain.LightRatio, *plain.NoiseRatio)
	require.InDelta(t, 1, *plain.LightRatio, 0.05)
	require.InDelta(t, 1, *plain.NoiseRatio, 0.1)
	for name, change := range map[string]func(*reduce.Recipe){
		"sky":  func(r *reduce.Recipe) { r.Sky.Use = "auto" },
		"flux": func(r *reduce.Recipe) { r.Sky.Use, r.Flux = "auto", flux },
	} {
		w := reached(change).Wanted[0]
		t.Logf("%s %.4f %.4f %.4f", name, *w.Ratio, *w.LightRatio, *w.NoiseRatio)
		require.InDelta(t, *plain.LightRatio, *w.LightRatio, 0.02, name)
		require.InEpsilon(t, *plain.NoiseRatio, *w.NoiseRatio, 0.01, name)
	}
}

// No cube, no forecast: nothing is compared. Wavelengths that a recipe's grid leaves out are
// said to be missing.
func TestNothingToCompare(t *testing.T) {
	n := night(t, 2, nil)
	require.NoError(t, n.Rehearse(context.Background(), "a", rehearse.Options{Seed: 3, NoTruth: true}))
	r, err := n.Reduce(context.Background(), "a", reduce.Options{Elements: true})
	require.NoError(t, err)
	require.Nil(t, r.Run.Forecast)
	require.NoError(t, os.RemoveAll(n.Run("a")))
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	g := n.Field.Profile.Grid
	recipe.Grid.FirstNM, recipe.Grid.StepNM, recipe.Grid.Count = g.FirstNM+5.2, 0.7, 20
	r, err = n.Reduce(context.Background(), "a", reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	require.NotNil(t, r.Run.Forecast, r.Run.Warnings)
	missing, there := 0, 0
	for _, w := range r.Run.Forecast.Wanted {
		if w.Ratio == nil {
			missing++
			require.Equal(t, "its wavelengths are not all in this cube", w.Why)
			continue
		}
		there++
		require.InDelta(t, 1, *w.NoiseRatio, 0.05, w.Name)
		require.Less(t, math.Abs(*w.LightRatio-1), 5**w.LightRatioError, w.Name)
	}
	require.Positive(t, missing)
	require.Positive(t, there)
}
