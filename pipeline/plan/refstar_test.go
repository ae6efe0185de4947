package plan_test

import (
	"context"
	"encoding/json"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// The plan takes the star last, and says its airmass, not the field's.
func TestRefStarPlan(t *testing.T) {
	target, profile := demo(t)
	without, bare := build(t, target, profile)
	require.Nil(t, bare.RefStar)
	text, err := json.Marshal(bare)
	require.NoError(t, err)
	require.NotContains(t, string(text), "refstar")

	star := &sequence.RefStarFrames{Name: "reference one", Count: 2, DwellSeconds: 20, RADeg: 160, DecDeg: -5, Elements: [2]int{40, 70}}
	target.Calibration.RefStar = star
	s, summary := build(t, target, profile)
	require.Equal(t, without.Steps, s.Steps[:len(without.Steps)])
	require.Len(t, s.Steps, len(without.Steps)+2)

	begin, err := time.Parse(time.RFC3339, bare.EndUTC)
	require.NoError(t, err)
	end, err := time.Parse(time.RFC3339, summary.EndUTC)
	require.NoError(t, err)
	at := func(at time.Time) float64 {
		return physics.TargetAirmass(160, -5, at, profile.Site.LatitudeDeg, profile.Site.LongitudeEastDeg)
	}
	require.InDelta(t, at(begin), summary.RefStar.Airmass[0], 1e-3, "within the second that the summary rounds to")
	require.InDelta(t, at(end), summary.RefStar.Airmass[1], 2e-3, "and a readout")
	require.Contains(t, summary.String(), "refstar  reference one, airmass ")

	star.DecDeg = -85
	_, summary = build(t, target, profile)
	require.Contains(t, summary.Warnings, "the reference star reference one is below the horizon; choose another")
	star.Elements[1] = 111
	_, _, err = plan.Build(context.Background(), target, profile)
	require.EqualError(t, err, "calibration.refstar.elements[1]: there is no element 111 among the field's 0 to 110; give one of these")
}
