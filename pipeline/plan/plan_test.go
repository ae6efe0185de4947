package plan_test

import (
	"context"
	"encoding/json"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

func demo(t testing.TB) (*sequence.Target, *instrument.Profile) {
	t.Helper()
	target, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	return target, profile
}

func build(t testing.TB, target *sequence.Target, profile *instrument.Profile) (*sequence.Sequence, *plan.Summary) {
	t.Helper()
	s, summary, err := plan.Build(context.Background(), target, profile)
	require.NoError(t, err)
	return s, summary
}

// The demo as its design says: v = 127, 111 elements, 16 dark columns, about
// 300 frames, no warning.
func TestRunDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "sequence")
	summary, err := plan.Run(context.Background(), plan.Options{Target: "demo", Profile: "optical", Out: dir})
	require.NoError(t, err)
	s, err := sequence.Read(context.Background(), dir)
	require.NoError(t, err)
	require.Equal(t, s.SHA, summary.SequenceSHA)
	require.Equal(t, 127, s.V)
	require.Equal(t, 111, s.N())
	require.Equal(t, s.DarkColumns(), summary.Code.DarkColumns)
	require.Equal(t, []plan.KindTotal{
		{Kind: sequence.Bias, Steps: 20, Minutes: 20 * 4. / 60},
		{Kind: sequence.Dark, Steps: 5, Minutes: 5 * 94. / 60},
		{Kind: sequence.Flat, Steps: 139, Minutes: 139 * 9. / 60},
		{Kind: sequence.Arc, Steps: 23, Minutes: 23 * 12. / 60},
		{Kind: sequence.AllOff, Steps: 9, Minutes: 9 * 94. / 60},
		{Kind: sequence.Science, Steps: 127, Minutes: 127 * 94. / 60},
	}, summary.Kinds)
	require.Equal(t, 323, summary.Steps)
	require.InDelta(t, (80+470+139*9+23*12+136*94)/60., summary.Minutes, 1e-9)
	// 672 x 192 pixels of two bytes fill 90 blocks of 2880; one more is header.
	require.InDelta(t, 323*91*2880/1e9, summary.Gigabytes, 1e-12)
	require.Equal(t, 154, summary.Masks)
	requireQuiet(t, summary)
	// The flats' four, seven of every code row's, arcs: one mask a distinct step.
	require.Len(t, dirNames(t, filepath.Join(dir, "masks")), 154)
}

func dirNames(t *testing.T, dir string) []string {
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	var names []string
	for _, e := range entries {
		names = append(names, e.Name())
	}
	return names
}

func TestRunInfraredDemo(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "sequence")
	summary, err := plan.Run(context.Background(), plan.Options{Target: "demo-infrared", Profile: "infrared", Out: dir})
	require.NoError(t, err)
	require.Equal(t, 83, summary.Code.V)
	require.Equal(t, 67, summary.Code.Elements)
	requireQuiet(t, summary)
	_, err = sequence.Read(context.Background(), dir)
	require.NoError(t, err)
}

func TestSummaryPrints(t *testing.T) {
	target, profile := demo(t)
	target.AllOffEvery = 0
	_, summary := build(t, target, profile)
	text := summary.String()
	for _, want := range []string{
		"demo field with optical", "m-sequence of v = 127 columns, k = 64 open at once, l = 32 of them in any two steps; shuffled order", "111 elements of 2 mirrors",
		"science     127     199.0", "all         314", "warning  no all-off frame",
	} {
		require.Contains(t, text, want)
	}
	require.True(t, strings.HasSuffix(text, "\n"))
	data, err := json.Marshal(summary)
	require.NoError(t, err)
	var back plan.Summary
	require.NoError(t, json.Unmarshal(data, &back))
	require.Equal(t, *summary, back)
	require.Contains(t, string(data), `"dark_correlation":`)
}

// The night's order: calibrations first, all-off frames around and between the
// science steps.
func TestOrderOfTheNight(t *testing.T) {
	target, profile := demo(t)
	s, _ := build(t, target, profile)
	var kinds []sequence.Kind
	for _, st := range s.Steps {
		if len(kinds) == 0 || kinds[len(kinds)-1] != st.Kind {
			kinds = append(kinds, st.Kind)
		}
	}
	require.Equal(t, []sequence.Kind{sequence.Bias, sequence.Dark, sequence.Flat, sequence.Arc}, kinds[:4])
	require.Equal(t, sequence.AllOff, kinds[4])
	require.Equal(t, sequence.AllOff, kinds[len(kinds)-1])
	since := 0
	for _, st := range s.Steps[slices.IndexFunc(s.Steps, func(st sequence.Step) bool { return st.Kind == sequence.AllOff }):] {
		if st.Kind == sequence.AllOff {
			since = 0
			continue
		}
		since++
		require.LessOrEqual(t, since, 16)
	}
}

// An all-off frame that falls on the end is taken once.
func TestAllOffAtTheEndIsNotDoubled(t *testing.T) {
	target, profile := demo(t)
	target.AllOffEvery = 127
	s, _ := build(t, target, profile)
	require.Len(t, s.StepsOf(sequence.AllOff), 2)
	target.AllOffEvery = 1
	s, _ = build(t, target, profile)
	require.Len(t, s.StepsOf(sequence.AllOff), 128)
}

func rowsOf(s *sequence.Sequence, kind sequence.Kind, cycle int) []int {
	var rows []int
	for _, st := range s.Steps {
		if st.Kind == kind && st.Cycle == cycle {
			rows = append(rows, st.Row)
		}
	}
	return rows
}

func TestOrderOfSteps(t *testing.T) {
	target, profile := demo(t)
	natural := make([]int, 127)
	for i := range natural {
		natural[i] = i
	}
	target.Code.Cycles, target.Code.Order = 2, sequence.OrderNatural
	s, _ := build(t, target, profile)
	require.Equal(t, natural, rowsOf(s, sequence.Science, 1))
	require.Equal(t, natural, rowsOf(s, sequence.Science, 2))

	target.Code.Order = sequence.OrderShuffled
	s, _ = build(t, target, profile)
	one, two, flat := rowsOf(s, sequence.Science, 1), rowsOf(s, sequence.Science, 2), rowsOf(s, sequence.Flat, 1)
	require.NotEqual(t, natural, one)
	require.NotEqual(t, one, two)
	require.NotEqual(t, one, flat)
	for _, rows := range [][]int{one, two, flat} {
		require.Equal(t, natural, slices.Sorted(slices.Values(rows)))
	}
	// A shuffle has about one fixed point, whatever its size; more than 8 has a
	// chance of 1e-6.
	fixed := 0
	for i, row := range one {
		if i == row {
			fixed++
		}
	}
	require.LessOrEqual(t, fixed, 8)

	// Another cycle leaves the first as it is; another seed does not.
	target.Code.Cycles = 1
	s, _ = build(t, target, profile)
	require.Equal(t, one, rowsOf(s, sequence.Science, 1))
	target.Code.Seed++
	s, _ = build(t, target, profile)
	require.NotEqual(t, one, rowsOf(s, sequence.Science, 1))
}

func TestArcs(t *testing.T) {
	target, profile := demo(t)
	target.Calibration.Arc.Every, target.Calibration.Arc.Count = 40, 2
	s, _ := build(t, target, profile)
	var singles []int
	for _, i := range s.StepsOf(sequence.Arc) {
		p, j := s.Pattern(i)
		require.Equal(t, sequence.PatternSingle, p)
		singles = append(singles, j)
	}
	require.Equal(t, []int{0, 40, 80, 110, 0, 40, 80, 110}, singles)
}

// Build leaves the target it was given as it was, and the sequence's own is
// complete.
func TestBuildResolvesACopy(t *testing.T) {
	target, profile := demo(t)
	target.Code.V, target.Code.Dark = nil, nil
	s, _ := build(t, target, profile)
	require.Nil(t, target.Code.V)
	require.Equal(t, s.V, *s.Target.Code.V)
	require.Equal(t, s.V-s.N(), *s.Target.Code.Dark)
}

func TestRunNamesTheTargetFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "mine.yaml")
	target, _ := demo(t)
	target.Code.ElementMirrors = 3
	text, err := target.YAML()
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(path, text, 0o644))
	out := filepath.Join(t.TempDir(), "sequence")
	_, err = plan.Run(context.Background(), plan.Options{Target: path, Profile: "optical", Out: out})
	require.EqualError(t, err, path+": code.v: 111 elements of 3 mirrors span 333 where the device has 256; give a smaller code.v, narrower elements or more code.dark")
	require.NoDirExists(t, out)
	var c *config.Error
	require.True(t, errors.As(err, &c))

	for _, o := range []plan.Options{{Target: "nowhere", Profile: "optical"}, {Target: "demo", Profile: "nowhere"}} {
		o.Out = out
		_, err = plan.Run(context.Background(), o)
		require.ErrorIs(t, err, os.ErrNotExist)
	}
}

func TestRunStopsWhenCancelled(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err := plan.Run(ctx, plan.Options{Target: "demo", Profile: "optical", Out: filepath.Join(t.TempDir(), "sequence")})
	require.ErrorIs(t, err, context.Canceled)
}

// requireQuiet asks for no warnings but those of the device and of the moon.
func requireQuiet(t *testing.T, summary *plan.Summary) {
	t.Helper()
	for _, w := range summary.Warnings {
		if !strings.HasPrefix(w, "the moon is up") {
			require.Contains(t, summary.Device.Warnings, w)
		}
	}
}
