package trade_test

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// night is the embedded proposal in a code of 139 columns.
func night(t testing.TB) (*sequence.Target, *instrument.Profile, forecast.Candidate) {
	t.Helper()
	target, err := sequence.LoadTarget("proposal")
	require.NoError(t, err)
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	return target, profile, forecast.Candidate{Family: "legendre", V: 139, K: 70, L: 35, N: 121, ElementMirrors: 2, Dark: 18, DwellSeconds: 20, Cycles: 4}
}

func limitOf(t testing.TB, target *sequence.Target, profile *instrument.Profile, c forecast.Candidate, science float64) trade.CycleLimit {
	t.Helper()
	light, err := forecast.New(target, profile)
	require.NoError(t, err)
	return trade.LimitOf(target, profile, light, c, science)
}

// airCase is a case of trade_refraction.py.
type airCase struct {
	RA        float64 `json:"ra"`
	Dec       float64 `json:"dec"`
	Start     string  `json:"start"`
	Seconds   float64 `json:"seconds"`
	Longitude float64 `json:"longitude"`
	Latitude  float64 `json:"latitude"`
	Height    float64 `json:"height_m"`
	HPa       float64 `json:"hpa"`
	Celsius   float64 `json:"celsius"`
	WaterHPa  float64 `json:"water_hpa"`
	NM        float64 `json:"nm"`
	GuideNM   float64 `json:"guide_nm"`
}

// The time in which refraction moves light by 0.35 elements, against astropy: with
// the same formula of the index within 0.5 %, with astropy's own refraction, another formula
// and round layers of air, within 2 %, and low in the sky 5 %: round layers take 1.5 % of
// refraction at 75 degrees from the zenith, by a term in tan^3 z, so three times as much of
// its change. East and west of the meridian, near it, and with the guide at either end of the
// band.
func TestCrosscheckRefractionLimit(t *testing.T) {
	var cases []airCase
	var limits []trade.CycleLimit
	hpa, celsius, water := 790.0, 4.0, 5.0
	var perElement float64
	var own []float64 // tolerance for astropy's own refraction
	for _, c := range []struct {
		start      string
		dec, guide float64
		science    float64
		own        float64
	}{
		{"2031-02-11T04:00:00Z", 21.6, 580, 15000, 0.02},
		{"2031-02-11T02:30:00Z", 21.6, 480, 3000, 0.02},
		{"2031-02-11T09:30:00Z", -10, 660, 3600, 0.05},
		{"2031-02-11T04:00:00Z", 60, 700, 12000, 0.02},
	} {
		target, profile, candidate := night(t)
		target.StartUTC, target.DecDeg = c.start, c.dec
		target.Forecast.Atmosphere = &scene.Atmosphere{Refraction: true, GuideNM: &c.guide, PressureHPa: &hpa, TemperatureC: &celsius, WaterHPa: &water}
		light, err := forecast.New(target, profile)
		require.NoError(t, err)
		limit := trade.LimitOf(target, profile, light, candidate, c.science)
		require.Equal(t, trade.RuleRefraction, limit.Rule)
		limits, own = append(limits, limit), append(own, c.own)
		perElement = profile.ArcsecPerU() * 2
		cases = append(cases, airCase{
			RA: target.RADeg, Dec: c.dec, Start: c.start, Seconds: light.Time(candidate).CalibrationSeconds + c.science/2,
			Longitude: profile.Site.LongitudeEastDeg, Latitude: profile.Site.LatitudeDeg, Height: profile.Site.HeightM,
			HPa: hpa, Celsius: celsius, WaterHPa: water, NM: limit.NM, GuideNM: c.guide,
		})
	}
	require.InDelta(t, 499.8, limits[0].NM, 0.5) // the lower end of the oxygen line
	require.InDelta(t, 657.4, limits[1].NM, 0.5) // the upper end of hydrogen's
	text, err := json.Marshal(cases)
	require.NoError(t, err)
	file := filepath.Join(t.TempDir(), "cases.json")
	require.NoError(t, os.WriteFile(file, text, 0o600))
	lines := strings.Fields(outside.Python(t, "trade_refraction.py", file))
	require.Len(t, lines, 2*len(cases))
	for i, limit := range limits {
		for k, tolerance := range []float64{0.005, own[i]} {
			rate, err := strconv.ParseFloat(lines[2*i+k], 64)
			require.NoError(t, err)
			want := 0.35 * perElement / rate * 3600
			t.Logf("%.1f nm against %g: %.0f s, astropy %.0f s", limit.NM, cases[i].GuideNM, limit.Seconds, want)
			require.InEpsilon(t, want, limit.Seconds, tolerance)
		}
	}
}

// The shortest limit rules: rates an hour by hand, elements twice as wide twice as long.
func TestShortestLimitRules(t *testing.T) {
	target, profile, c := night(t)
	const science = 14000
	air := limitOf(t, target, profile, c, science)
	require.Equal(t, trade.RuleRefraction, air.Rule)
	wide := c
	wide.ElementMirrors, wide.N, wide.Dark = 4, 60, 79
	require.InEpsilon(t, 2*air.Seconds, limitOf(t, target, profile, wide, science).Seconds, 1e-3)

	l := &target.Forecast.Limits
	l.FlexurePxPerHour = 0.7 // 0.35 px in half an hour
	require.Equal(t, trade.CycleLimit{Rule: trade.RuleFlexure, Seconds: 1800}, limitOf(t, target, profile, c, science))
	l.SeeingChangePerHour = 1.4 // 35 % in a quarter
	require.Equal(t, trade.CycleLimit{Rule: trade.RuleSeeing, Seconds: 900}, limitOf(t, target, profile, c, science))
	l.CycleSeconds = 800
	require.Equal(t, trade.CycleLimit{Rule: trade.RuleKey, Seconds: 800}, limitOf(t, target, profile, c, science))
	l.SkyChangePerHour = 10.5 // two minutes; no limit, but told
	require.Equal(t, trade.RuleKey, limitOf(t, target, profile, c, science).Rule)
	require.Equal(t, trade.RuleSky, trade.SkyLimit(target).Rule)
	require.InDelta(t, 120, trade.SkyLimit(target).Seconds, 1e-9)

	// Only the target's own key binds a slit scan.
	require.Equal(t, trade.RuleKey, limitOf(t, target, profile, c.SlitScan(), science).Rule)
	l.CycleSeconds = 0
	require.Zero(t, limitOf(t, target, profile, c.SlitScan(), science))

	// A corrector of refraction, and a target below the horizon.
	*l = sequence.Limits{TotalSeconds: 18000}
	target.Forecast.Atmosphere = &scene.Atmosphere{}
	require.Zero(t, limitOf(t, target, profile, c, science))
	target.Forecast.Atmosphere = nil
	target.DecDeg = -80
	require.Zero(t, limitOf(t, target, profile, c, science))
}

// What is said of a cycle too long: the rule, its figure and the cure, in one sentence.
func TestCycleWarning(t *testing.T) {
	l := trade.CycleLimit{Rule: trade.RuleRefraction, Seconds: 1200, NM: 499.83}
	require.Empty(t, l.Warning(1200))
	require.Equal(t, "a cycle takes 3000 s of the 1200 s that are allowed by refraction, which moves light of 499.83 nm by 0.35 elements in that time; give a shorter dwell_s and more code.cycles, or a narrower band about the guide's wavelength", l.Warning(3000))
	for rule, word := range map[trade.Rule]string{trade.RuleKey: "forecast.limits.cycle_s", trade.RuleFlexure: "drifts 0.35 px", trade.RuleSeeing: "changes by 35 %", trade.RuleSky: "the sky's lines"} {
		w := trade.CycleLimit{Rule: rule, Seconds: 100}.Warning(150)
		require.Contains(t, w, word)
		require.Contains(t, w, "give a shorter dwell_s and more code.cycles")
	}
	require.Empty(t, trade.CycleLimit{}.Warning(1e9))
	require.Empty(t, trade.CycleLimit{}.String())
}
