package reduce_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// oneStarNight is a drifting night of a sky that cannot measure throughput, with ten
// sentinel rows on its star.
func oneStarNight(t *testing.T, faults ...rehearse.Fault) *trial.Night {
	f, err := trial.Square()
	require.NoError(t, err)
	f.Show(trial.Skies()[3])
	star := f.Scene.Sources[0]
	at := trial.StarPlaces[0]
	row := int(math.Round((at[1] + 1) / 2 * 39)) // of the device's 40
	element := int(math.Round((at[0] + 1) / 2 * float64(f.Elements()-1)))
	f.Scene.Sources = append(f.Scene.Sources[:0], star)
	f.Scene.Sky.ContinuumABArcsec2 = ptr(21.0)
	f.Target.SentinelRows = []sequence.SentinelRow{{First: row - 7, Last: row + 7, Element: element}}
	night, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(context.Background(), "a", rehearse.Options{Seed: 5, NoTruth: true, Faults: faults}))
	return night
}

func ptr(x float64) *float64 { return &x }

func reduceAuto(t *testing.T, night *trial.Night, use string) *reduce.Result {
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Throughput.Use = use
	require.NoError(t, os.RemoveAll(night.Run("a")))
	result, err := night.Reduce(context.Background(), "a", reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	return result
}

// One star on a sky of one colour: the dark columns cannot measure every frame, sentinel
// rows on the star can, and see the image move.
func TestSentinelNight(t *testing.T) {
	night := oneStarNight(t, append(drifts(), rehearse.Fault{Name: rehearse.Shift, Size: 0.2})...)
	run := reduceAuto(t, night, "auto").Run
	c, err := night.Throughput("a")
	require.NoError(t, err)
	s := run.Throughput
	t.Logf("%+v %+v %+v", *c, s, s.Image)
	require.Len(t, s.Methods, 2)
	// 62 differences: 5 standard errors of an rms are 45 %.
	require.InEpsilon(t, c.Predicted, c.Measured, 0.45)
	require.Less(t, c.Measured, 0.02)
	require.Greater(t, s.Methods[1].Error, 0.03, "the dark columns alone")
	require.Less(t, s.HeldOut[1].After, 1.25)
	require.InDelta(t, math.Hypot(0.2, s.Image.XPx.Error), s.Image.XPx.Value, 0.1)
	require.InDelta(t, math.Hypot(0.2, s.Image.YPx.Error), s.Image.YPx.Value, 0.1)
	require.Empty(t, run.Warnings)
	page, err := os.ReadFile(filepath.Join(night.Run("a"), "report.html"))
	require.NoError(t, err)
	require.Contains(t, string(page), "Frames and throughput over the night")
	require.Contains(t, string(page), "By sentinel rows")
}

// A monitor's table is believed by its errors; one that contradicts the dark columns is
// told of.
func TestMonitorNight(t *testing.T) {
	night := oneStarNight(t, drifts()...)
	truth, err := night.Faults("a")
	require.NoError(t, err)
	r := rand.New(rand.NewPCG(7, 8))
	write := func(sigma, wrong float64) string {
		var text strings.Builder
		text.WriteString("step,flux,error\n")
		for _, f := range truth.Frames {
			if f.Kind == sequence.Science {
				c := f.Throughput + sigma*r.NormFloat64() + wrong*float64(f.Step%2)
				fmt.Fprintf(&text, "%d,%.9g,%.9g\n", f.Step, 7*c, 7*sigma)
			}
		}
		path := filepath.Join(t.TempDir(), "m.csv")
		require.NoError(t, os.WriteFile(path, []byte(text.String()), 0o644))
		return path
	}
	run := reduceAuto(t, night, write(0.003, 0)).Run
	c, err := night.Throughput("a")
	require.NoError(t, err)
	t.Logf("%+v %+v", *c, run.Throughput)
	require.InEpsilon(t, c.Predicted, c.Measured, 0.45)
	require.Less(t, c.Measured, 0.005)
	require.Less(t, run.Throughput.HeldOut[1].After, 1.1)
	require.Empty(t, run.Warnings)

	run = reduceAuto(t, night, write(0.003, 0.2)).Run
	require.Contains(t, strings.Join(run.Warnings, "\n"), "disagree")
}

// A pedestal of each frame that no overscan shows is measured on unlit pixels and taken
// off; where there is none, nothing is.
func TestOffsetsOfANight(t *testing.T) {
	f, err := trial.Diagonal()
	require.NoError(t, err)
	f.Target.Closed = []sequence.ClosedRow{{First: -95, Last: -25}, {First: 25, Last: 95}}
	night, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	for _, size := range []float64{20, 0} {
		faults := drifts()
		if size > 0 {
			faults = append(faults, rehearse.Fault{Name: rehearse.Offset, Size: size})
		}
		require.NoError(t, os.RemoveAll(night.Frames("a")))
		require.NoError(t, night.Rehearse(context.Background(), "a", rehearse.Options{Seed: 5, NoTruth: true, Faults: faults}))
		run := reduceAuto(t, night, "auto").Run
		o := run.Throughput.Offset
		require.NotNil(t, o)
		t.Logf("%+v %+v", o, run.Throughput)
		c, err := night.Throughput("a")
		require.NoError(t, err)
		require.InEpsilon(t, c.Predicted, c.Measured, 0.45)
		if size == 0 {
			require.Less(t, o.Value, 1.0)
			continue
		}
		ledger, err := product.ReadLedger(filepath.Join(night.Run("a"), product.LedgerFile))
		require.NoError(t, err)
		truth, err := night.Faults("a")
		require.NoError(t, err)
		var own, off trial.Moments
		for _, e := range ledger {
			if e.Step > 0 && e.Kind == string(sequence.Science) {
				own.Add(truth.Frames[e.Step-1].OffsetE)
				off.Add(e.OffsetE - truth.Frames[e.Step-1].OffsetE)
			}
		}
		// All are measured against the bias frames, which have levels of their own.
		require.Less(t, off.Std(), 0.1*own.Std())
	}
}

// All-off frames have throughputs of their own: what they are off by is measured on the
// dark columns.
func TestLeakFactorOfANight(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	f.Target.AllOffEvery = 8
	f.Target.DwellSeconds *= 40 // the throughputs must be known to a thousandth
	f.Target.Calibration.Dark.DwellSeconds = f.Target.DwellSeconds
	night, err := f.Plan(context.Background(), t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(context.Background(), "a", rehearse.Options{Seed: 6, NoTruth: true, Faults: append(drifts(), rehearse.Fault{Name: rehearse.Leak, Size: 0.05})}))
	m := reduceAuto(t, night, "auto").Run.Throughput.Leak
	require.NotNil(t, m, "the error is below a tenth")
	truth, err := night.Faults("a")
	require.NoError(t, err)
	var science, off trial.Moments
	for _, frame := range truth.Frames {
		switch frame.Kind {
		case sequence.Science:
			science.Add(frame.Throughput)
		case sequence.AllOff:
			off.Add(frame.Throughput)
		}
	}
	t.Logf("%+v, due %.4f", *m, science.Mean()/off.Mean())
	require.InDelta(t, science.Mean()/off.Mean(), m.Value, 5*m.Error+0.002)
	require.Less(t, m.Error, 0.05)
}
