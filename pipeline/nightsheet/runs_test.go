package nightsheet

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// night is 2 biases, a flat quartet, and two cycles of 4 code rows with all-off frames at the
// start, after every third and at the end; reading takes 2 s.
func night() *sequence.Sequence {
	s := &sequence.Sequence{
		Family: "m-sequence", V: 4, Profile: &instrument.Profile{Detector: instrument.Detector{ReadS: 2}},
		Target: &sequence.Target{AllOffEvery: 3, Code: sequence.CodeChoice{Cycles: 2}},
	}
	add := func(k sequence.Kind, seconds float64, row, cycle int) {
		s.Steps = append(s.Steps, sequence.Step{Step: len(s.Steps) + 1, Kind: k, ExptimeSeconds: seconds, Row: row, Cycle: cycle})
	}
	add(sequence.Bias, 0, -1, 0)
	add(sequence.Bias, 0, -1, 0)
	for range 4 {
		add(sequence.Flat, 3, -1, 0)
	}
	add(sequence.AllOff, 10, -1, 0)
	for i := range 8 {
		add(sequence.Science, 10, i%4, 1+i/4)
		if i == 2 || i == 5 || i == 7 {
			add(sequence.AllOff, 10, -1, 0)
		}
	}
	return s
}

// Runs counted by hand.
func TestRuns(t *testing.T) {
	s := night()
	start := time.Date(2031, 2, 11, 23, 59, 50, 0, time.UTC)
	steps := stepsOf(s, start)
	require.Len(t, steps, 18)
	require.Equal(t, "2031-02-11T23:59:54Z", steps[2].StartUTC) // after two readings of 2 s
	type line struct {
		first, last int
		kind        sequence.Kind
	}
	lines := func(how fineness) (list []line) {
		for _, r := range runsOf(s, steps, how) {
			list = append(list, line{r.First, r.Last, r.Kind})
		}
		return list
	}
	require.Equal(t, []line{
		{1, 2, "bias"}, {3, 6, "flat"}, {7, 7, "all-off"}, {8, 10, "science"}, {11, 11, "all-off"}, {12, 12, "science"},
		{13, 14, "science"}, {15, 15, "all-off"}, {16, 17, "science"}, {18, 18, "all-off"},
	}, lines(everyRun))
	require.Equal(t, []line{{1, 2, "bias"}, {3, 6, "flat"}, {7, 12, "science"}, {13, 18, "science"}}, lines(cycleRuns))
	require.Equal(t, []line{{1, 2, "bias"}, {3, 6, "flat"}, {7, 18, "science"}}, lines(nightRuns))
	runs := runsOf(s, steps, cycleRuns)
	require.Equal(t, "cycle 1: 4 code rows, 2 all-off, one after every 3", runs[2].What)
	require.InDelta(t, 6*12.0/60, runs[2].Minutes, 1e-12)
	require.Equal(t, "00:00:14 +1d", clock(runs[2].StartUTC, steps[0].StartUTC)) // 24 s after the start
	require.Equal(t, "cycles 1 to 2: 8 code rows, 4 all-off, one after every 3", runsOf(s, steps, nightRuns)[2].What)
	require.Equal(t, "all elements on, the even, the odd, none, in turn", runs[1].What)
}

// Positions in sexagesimal, by hand: 1 h = 15 degrees; digits carry over.
func TestSpelling(t *testing.T) {
	for _, c := range []struct {
		ra, dec      float64
		hours, above string
	}{
		{123.3, 21.6, "08:13:12.00", "+21:36:00.0"},
		{226.5, -33.4, "15:06:00.00", "-33:24:00.0"},
		{0.00004, -0.5 / 3600, "00:00:00.01", "-00:00:00.5"},
		{359.99999, 89.999999, "00:00:00.00", "+90:00:00.0"},
		{14.9999999, -59.99999, "01:00:00.00", "-60:00:00.0"},
		{0, 0, "00:00:00.00", "+00:00:00.0"},
	} {
		p := Position{RADeg: c.ra, DecDeg: c.dec}
		p.spell()
		require.Equal(t, []string{c.hours, c.above}, []string{p.RA, p.Dec})
	}
}

func TestNumbers(t *testing.T) {
	for x, want := range map[float64]string{0: "0", 1.5: "1.5", 42.937: "42.9", 0.0255: "0.0255", 10078.2: "10078", 100: "100", 20: "20", 1e-12: "1e-12"} {
		require.Equal(t, want, number(x))
	}
	for minutes, want := range map[float64]string{0.5: "30 s", 1.25: "1.2 min", 59.96: "1 h 00 min", 61: "1 h 01 min", 1500: "25 h 00 min"} {
		require.Equal(t, want, duration(minutes))
	}
	require.Equal(t, []string{"A", "Z", "A2", "B3"}, []string{label(0), label(25), label(26), label(53)})
	for n, want := range map[int]string{2: "second", 3: "3rd", 5: "5th", 11: "11th", 21: "21st", 22: "22nd"} {
		require.Equal(t, want, ordinal(n))
	}
}
