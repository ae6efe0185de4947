package plan_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// Transit and window of the demo's field are astropy's within 2 minutes (both are in whole
// minutes; an airmass of 2 is a zenith distance of 60 degrees but for 0.1), the sun's
// altitude within half a degree, by which it sinks in the hours of the plan, at its start.
func TestCrosscheckWindow(t *testing.T) {
	target, profile := demo(t)
	s, summary := build(t, target, profile)
	v := summary.Visibility
	at, first, last := 0.0, -1.0, 0.0
	for _, st := range s.Steps {
		if st.Kind == sequence.Science {
			if first < 0 {
				first = at
			}
			last = at + st.ExptimeSeconds
		}
		at += st.ExptimeSeconds + profile.OverheadS()
	}
	middle := mustStart(t, target.StartUTC).Add(time.Duration((first + last) / 2 * float64(time.Second)))
	text := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	words := strings.Fields(outside.Python(t, "plan_window.py", text(target.RADeg), text(target.DecDeg), text(profile.Site.LatitudeDeg), text(profile.Site.LongitudeEastDeg), middle.Format("2006-01-02T15:04:05")))
	require.Len(t, words, 4)
	for i, got := range []string{v.TransitUTC, v.Window[0], v.Window[1]} {
		minutes, err := strconv.ParseFloat(words[i], 64)
		require.NoError(t, err)
		at, err := time.Parse("2006-01-02T15:04Z", got)
		require.NoError(t, err)
		require.InDelta(t, minutes, at.Sub(middle).Minutes(), 2, got)
	}
	sunThen, err := strconv.ParseFloat(words[3], 64)
	require.NoError(t, err)
	require.GreaterOrEqual(t, v.SunDeg, sunThen-0.02)
	require.True(t, v.Observable)
	require.Empty(t, v.Verdict)
}

func mustStart(t *testing.T, utc string) time.Time {
	t.Helper()
	at, err := time.Parse(time.RFC3339, utc)
	require.NoError(t, err)
	return at
}

// What cannot be observed is refused with nothing written; what can in part is planned with a
// warning that says so.
func TestUnobservable(t *testing.T) {
	for _, c := range []struct{ name, old, new, want string }{
		{"never up", "dec_deg: ", "dec_deg: -75 # ", "cannot be observed: the field is below the horizon in all science exposures; it never rises from this site; choose another target or site"},
		{"by day", "start_utc: ", "start_utc: 2031-07-11T18:00:00Z # ", "the sun is up in all science exposures"},
		{"set", "start_utc: ", "start_utc: 2031-02-11T13:30:00Z # ", "in all science exposures"},
	} {
		data, err := os.ReadFile("../../configs/targets/demo.yaml")
		require.NoError(t, err)
		dir := t.TempDir()
		file := filepath.Join(dir, "target.yaml")
		require.Contains(t, string(data), "\n"+c.old)
		require.NoError(t, os.WriteFile(file, []byte(strings.Replace(string(data), "\n"+c.old, "\n"+c.new, 1)), 0o600))
		out := filepath.Join(dir, "out")
		_, err = plan.Run(context.Background(), plan.Options{Target: file, Profile: "optical", Out: out})
		require.ErrorContains(t, err, c.want, c.name)
		require.ErrorContains(t, err, file)
		require.NoDirExists(t, out)
	}
	target, profile := demo(t)
	target.StartUTC = "2031-02-11T10:00:00Z"
	_, summary := build(t, target, profile)
	require.True(t, summary.Visibility.Observable)
	require.Contains(t, fmt.Sprint(summary.Warnings), "% of the science time; it transits at 2031-02-11T")
}

// Twilight and the moon are warned of.
func TestTwilight(t *testing.T) {
	target, profile := demo(t)
	for start, want := range map[string]string{
		"2031-02-11T04:00:00Z": "the moon is up, at most",
		"2031-02-11T08:55:00Z": "twilight",
	} {
		target.StartUTC = start
		_, summary := build(t, target, profile)
		require.Contains(t, fmt.Sprint(summary.Warnings), want, "%s %v", start, *summary.Visibility)
	}
}

// A lamp that no list has is refused, and one that is said to be continuous but is not.
func TestLamps(t *testing.T) {
	for lamp, want := range map[string]string{"Foo": `no list has the lines of lamp "Foo"`, "NeNe": `lamp "NeNe"`, "HeHgNe": "", "Ne": ""} {
		target, profile := demo(t)
		target.Calibration.Arc.Lamp = lamp
		_, _, err := plan.Build(context.Background(), target, profile)
		if want == "" {
			require.NoError(t, err)
			continue
		}
		require.ErrorContains(t, err, want)
	}
	target, profile := demo(t)
	target.Calibration.Flat.Lamp = "Foo"
	_, _, err := plan.Build(context.Background(), target, profile)
	require.ErrorContains(t, err, "calibration.flat.lamp: flats by lamp \"Foo\" are not known")
}

// Calibrations that take longer than science, and what will not be seen, are warned of.
func TestHopeless(t *testing.T) {
	target, profile := demo(t)
	target.Calibration.Dark.Count, target.Calibration.Dark.DwellSeconds = 50, 900
	_, summary := build(t, target, profile)
	require.Contains(t, fmt.Sprint(summary.Warnings), "cut calibration.dark, which takes 75")
}
