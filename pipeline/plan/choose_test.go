package plan_test

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

func proposal(t testing.TB) (*sequence.Target, *instrument.Profile) {
	t.Helper()
	target, err := sequence.LoadTarget("proposal")
	require.NoError(t, err)
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	return target, profile
}

// small is the proposal in elements of three mirrors, for speed.
func small(t testing.TB) (*sequence.Target, *instrument.Profile) {
	target, profile := proposal(t)
	target.Code.ElementMirrors = 3
	return target, profile
}

// chosen is the row that is planned.
func chosen(t testing.TB, tr *trade.Trade) *trade.Row {
	t.Helper()
	for i := range tr.Rows {
		if tr.Rows[i].Chosen {
			return &tr.Rows[i]
		}
	}
	require.Fail(t, "no row is chosen")
	return nil
}

// The embedded proposal, from file to folder: the sequence is whole, the best row within the
// limits is what it holds, and every limit is kept.
func TestRunProposal(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "sequence")
	summary, err := plan.Run(context.Background(), plan.Options{Target: "proposal", Profile: "optical", Out: dir})
	require.NoError(t, err)
	s, err := sequence.Read(context.Background(), dir)
	require.NoError(t, err)
	tr := summary.Trade
	row := chosen(t, tr)
	require.Equal(t, tr.Rows[0], *row)
	require.Equal(t, s.Family, row.Candidate.Family)
	require.Equal(t, s.V, row.Candidate.V)
	require.Equal(t, s.Target.DwellSeconds, row.Candidate.DwellSeconds)
	// That of the faintest; a candidate's throughput is judged by the mean over codes' columns.
	require.InEpsilon(t, summary.Forecast.Wanted[0].SNR, row.Figure, 2e-3)
	limits := s.Target.Forecast.Limits
	require.LessOrEqual(t, 60*summary.Minutes, limits.TotalSeconds)
	require.InDelta(t, 60*summary.Minutes, row.TotalSeconds, 1e-6)
	require.Greater(t, 60*summary.Minutes, 0.99*limits.TotalSeconds)
	require.GreaterOrEqual(t, len(s.DarkColumns()), 4*limits.LostFrames)
	require.Greater(t, row.LossGrowth, 1.)
	require.Less(t, row.LossGrowth, 2.)
	slit := tr.Slit(row.Candidate.ElementMirrors)
	require.NotNil(t, slit)
	require.InDelta(t, row.Figure/slit.Figure, row.OverSlit, 1e-12)
	table, err := os.ReadFile(filepath.Join(dir, "trade.csv"))
	require.NoError(t, err)
	require.Len(t, strings.Split(strings.TrimSpace(string(table)), "\n"), 1+len(tr.Rows))
	drawn, err := os.ReadFile(filepath.Join(dir, "trade.svg"))
	require.NoError(t, err)
	require.Contains(t, string(drawn), "slit-scan")
	require.Contains(t, summary.String(), tr.Recommendation)
}

// An explicit code is kept, and the better one named.
func TestExplicitCodeIsKept(t *testing.T) {
	target, profile := small(t)
	v, dark := 127, 47
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Cycles = "m-sequence", &v, &dark, 1
	target.DwellSeconds = 60
	target.Forecast.Atmosphere = &scene.Atmosphere{} // no refraction limits its one long cycle
	s, summary := build(t, target, profile)
	require.Equal(t, "m-sequence", s.Family)
	require.Equal(t, 60., s.Target.DwellSeconds)
	require.Regexp(t, `^Better than m-sequence of v = 127, by a factor of [0-9.]+ in S/N, is `, summary.Trade.Recommendation)
	require.True(t, summary.Trade.Own().Given)

	// The best code itself is kept without a better one.
	auto, profile := small(t)
	auto.Forecast.Atmosphere = target.Forecast.Atmosphere
	_, best := build(t, auto, profile)
	c := chosen(t, best.Trade).Candidate
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Cycles = c.Family, &c.V, &c.Dark, c.Cycles
	target.DwellSeconds, target.Closed = c.DwellSeconds, c.Closed
	_, summary = build(t, target, profile)
	require.Regexp(t, `^Keep `+c.Family, summary.Trade.Recommendation)
}

// When light is all the noise and what is wanted is fainter than twice the mean of its row,
// the slit scan wins and is recommended; faint and read-noise limited, a code.
func TestSlitScanWinsWherePhotonsRule(t *testing.T) {
	target, profile := small(t)
	bright := 12.0 // a sky like daylight
	target.Forecast.Sky.ContinuumABArcsec2 = &bright
	target.Forecast.ThroughputRMS = 0
	_, summary := build(t, target, profile)
	row := chosen(t, summary.Trade)
	require.True(t, row.IsSlit(), summary.Trade.Recommendation)
	require.Contains(t, summary.Trade.Recommendation, "the slit scan of")
	require.Contains(t, summary.Trade.Recommendation, "photons of everything that overlaps")

	target, profile = small(t)
	_, summary = build(t, target, profile)
	require.False(t, chosen(t, summary.Trade).IsSlit())
}

// A star that would saturate: with mirrors closed on it where nobody wants it, with a shorter
// dwell where somebody does, and it is said.
func TestSaturatingStar(t *testing.T) {
	target, profile := small(t)
	mag := 7.5
	target.Forecast.Sources[2].ABMag = &mag
	_, summary := build(t, target, profile)
	row := chosen(t, summary.Trade)
	require.Less(t, row.Full, 0.91)
	require.Equal(t, []int{2}, row.Covered)
	require.Contains(t, summary.Trade.Recommendation, "the mirrors on source 2 (star at -17.3, 3.4 arcsec) closed")

	// Nobody may lose it: it is wanted now.
	source := 2
	target.Forecast.Wanted = append(target.Forecast.Wanted, sequence.Wanted{Name: "bright star", Source: &source, BandNM: []float64{540, 560}})
	_, summary = build(t, target, profile)
	row = chosen(t, summary.Trade)
	require.Empty(t, row.Covered)
	require.LessOrEqual(t, row.Full, 0.901)
	require.Contains(t, summary.Trade.Recommendation, "no longer dwell, as source 2 saturates after")

	// An explicit dwell is kept; what would do is said.
	v, dark := 127, 47
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Cycles = "m-sequence", &v, &dark, 1
	target.DwellSeconds = 90
	_, summary = build(t, target, profile)
	require.Equal(t, trade.BreachSaturation, summary.Trade.Own().Breaks)
	require.Regexp(t, `^M-sequence of v = 127 is not within the limits: its brightest pixel saturates after .*; take `, summary.Trade.Recommendation)
}

// Impossible targets: what is wrong and what would make them possible.
func TestImpossibleTargets(t *testing.T) {
	for _, c := range []struct {
		name string
		edit func(target *sequence.Target)
		want string
	}{
		{"no time", func(target *sequence.Target) { target.Forecast.Limits.TotalSeconds = 900 },
			`the shortest night takes .*; it would take forecast\.limits\.total_s of [0-9]+ s`},
		{"no cycle", func(target *sequence.Target) { target.Forecast.Limits.CycleSeconds = 60 },
			`a cycle takes .* or more of the 60 s that are allowed by forecast\.limits\.cycle_s; it would take forecast\.limits\.cycle_s of [0-9]+ s`},
		{"saturated", func(target *sequence.Target) {
			mag := 7.5
			target.Forecast.Sources[1].ABMag, target.DwellSeconds = &mag, 90
		}, `its brightest pixel saturates after .*; it would take dwell_s of [0-9.]+ s`},
		{"no code", func(target *sequence.Target) { v := 44; target.Code.V = &v; target.Forecast.Limits.TotalSeconds = 100 },
			`the shortest night takes`},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := small(t)
			c.edit(target)
			s, summary, err := plan.Build(context.Background(), target, profile)
			require.Error(t, err)
			require.Regexp(t, c.want, err.Error())
			require.NotContains(t, err.Error(), "\n")
			require.Nil(t, s)
			require.Nil(t, summary)
			var e *config.Error
			require.ErrorAs(t, err, &e)
		})
	}
}

// What changes in a night without being a factor per frame shortens the cycles of a choice,
// and the slit scan wins where none is short enough; an explicit code is kept and warned of.
func TestCyclesFollowFromChange(t *testing.T) {
	target, profile := small(t)
	target.Forecast.Limits.SkyChangePerHour = 0.7
	_, summary := build(t, target, profile)
	row := chosen(t, summary.Trade)
	require.Equal(t, trade.RuleRefraction, row.CycleLimit.Rule)
	require.Greater(t, row.Candidate.Cycles, 1)
	require.LessOrEqual(t, row.CycleSeconds, row.CycleLimit.Seconds)
	require.Contains(t, summary.String(), "A cycle may take ")
	require.Contains(t, summary.String(), "the limit is that of refraction, which moves light of 499.83 nm by 0.35 elements in that time")
	require.Contains(t, strings.Join(summary.Warnings, "\n"), "s that are allowed by the sky's lines, which change by 35 % in that time; give a shorter dwell_s")

	target.Forecast.Limits.FlexurePxPerHour = 0.35
	_, summary = build(t, target, profile)
	row = chosen(t, summary.Trade)
	require.Equal(t, trade.CycleLimit{Rule: trade.RuleFlexure, Seconds: 3600}, row.CycleLimit)
	require.LessOrEqual(t, row.CycleSeconds, 3600.)

	target.Forecast.Limits.FlexurePxPerHour = 35 // 36 s, the time of a few read-outs
	_, summary = build(t, target, profile)
	require.True(t, chosen(t, summary.Trade).IsSlit())
	require.Contains(t, summary.Trade.Recommendation, "as no code's cycle is short enough: ")

	target, profile = small(t)
	v, dark := 127, 47
	target.Code.Family, target.Code.V, target.Code.Dark, target.Code.Cycles = "m-sequence", &v, &dark, 1
	target.DwellSeconds = 60
	target.Forecast.Limits.FlexurePxPerHour = 0.35
	s, summary := build(t, target, profile)
	require.Equal(t, 60., s.Target.DwellSeconds)
	own := summary.Trade.Own()
	require.Equal(t, trade.BreachCycle, own.Breaks)
	require.Contains(t, summary.Warnings, own.CycleLimit.Warning(own.CycleSeconds))
}

// A limit on the cycle's time makes several cycles; a fixed dwell as many as there is time for.
func TestCyclesFollowFromLimits(t *testing.T) {
	target, profile := small(t)
	target.Forecast.Limits.CycleSeconds = 5000
	s, summary := build(t, target, profile)
	row := chosen(t, summary.Trade)
	require.Greater(t, s.Target.Code.Cycles, 1)
	require.LessOrEqual(t, row.CycleSeconds, 5000.)
	require.LessOrEqual(t, row.TotalSeconds, 18000.)

	target, profile = small(t)
	target.DwellSeconds = 20
	s, summary = build(t, target, profile)
	row = chosen(t, summary.Trade)
	require.Equal(t, 20., s.Target.DwellSeconds)
	require.LessOrEqual(t, row.TotalSeconds, 18000.)
	require.Greater(t, row.TotalSeconds+row.CycleSeconds, 18000.)
}
