package plan_test

import (
	"context"
	"math"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

// starField is a small coded field with stars on a smooth sky, which tells dark columns little.
func starField(t *testing.T, asked sequence.SourceRows, stars ...scene.Source) (*sequence.Target, *instrument.Profile) {
	t.Helper()
	target, profile := demo(t)
	profile.DMD.Columns, profile.DMD.Rows = 100, 60
	target.Code.V, target.Code.Dark = ptr(63), ptr(16)
	target.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: 1.2, Sources: stars, Aim: sequence.AimFaintest, Sky: scene.Sky{ContinuumABArcsec2: ptr(21.0)},
	}
	target.FromSources = &asked
	return target, profile
}

func star(east, north, mag float64) scene.Source {
	return scene.Source{Kind: scene.KindStar, EastArcsec: east, NorthArcsec: north, ABMag: &mag, AtNM: 550, TemperatureK: 6000}
}

// Sentinel rows lie where a calculation by hand puts the star: north is up, east to smaller
// elements (section 9 of the design), one FWHM of the seeing and one and a half line widths to
// both sides.
func TestPickedSentinels(t *testing.T) {
	target, profile := starField(t, sequence.SourceRows{Sentinels: 1})
	a, step := profile.DMD.ArcsecPerMirror, 2*profile.DMD.ArcsecPerMirror
	// In the middle of element 10 of 47, five rows above the middle of 60.
	target.Forecast.Sources = []scene.Source{star(13*step, 5*a, 16), star(-7*step, -12*a, 17.5)}
	s, summary := build(t, target, profile)
	half := 1.2/a + 1.5*profile.Spectrograph.LSFFWHMPx/profile.Spectrograph.WStepPx
	want := sequence.SentinelRow{First: int(math.Floor(29.5 + 5 - half)), Last: int(math.Ceil(29.5 + 5 + half)), Element: 10}
	require.Equal(t, []sequence.SentinelRow{want}, s.Target.SentinelRows)
	require.Nil(t, s.Target.FromSources)
	require.NotNil(t, target.FromSources, "the caller's target is left as it is")
	require.Len(t, summary.Picked, 1)
	require.Contains(t, summary.String(), "sentinel, element 10, on source 0: its S/N of ")
	again, _ := build(t, s.Target, profile)
	require.Equal(t, s.Rows, again.Rows, "the resolved target plans the same")

	// Two ranges where they do not meet.
	target.FromSources.Sentinels = 2
	s, _ = build(t, target, profile)
	require.Len(t, s.Target.SentinelRows, 1, "their rows meet")
	target.Forecast.Sources[1] = star(-7*step, -22*a, 16.5)
	target.Forecast.SeeingFWHMArcsec = 0.6
	s, _ = build(t, target, profile)
	require.Len(t, s.Target.SentinelRows, 2)
	require.Equal(t, 30, s.Target.SentinelRows[1].Element)

	// Mounted diagonally a mirror is 1/sqrt 2 as wide; the position angle turns the field: with
	// +w to the east at 90 degrees, +u points to the north.
	target.FromSources.Sentinels = 1
	profile.DMD.Mounting = instrument.Diagonal
	profile.DMD.Columns, profile.DMD.Rows = 100, 101 // u from 0 to 199, w from -99 to 100
	target.RotangDeg = 90
	a /= math.Sqrt2
	target.Forecast.Sources = []scene.Source{star(5*a, -4*2*a, 15)}
	s, _ = build(t, target, profile)
	half = 0.6/a + 1.5*profile.Spectrograph.LSFFWHMPx/profile.Spectrograph.WStepPx
	require.Equal(t, []sequence.SentinelRow{{First: int(math.Floor(0.5 + 5 - half)), Last: int(math.Ceil(0.5 + 5 + half)), Element: 19}}, s.Target.SentinelRows)
}

// Where no star will do, or none is needed, a sentence says why and no rows are planned.
func TestNoSentinels(t *testing.T) {
	lines := []scene.SkyLine{{WavelengthNM: 557.889, FluxWM2Arcsec2: 3e-17}, {WavelengthNM: 500.2, FluxWM2Arcsec2: 3e-17}, {WavelengthNM: 530, FluxWM2Arcsec2: 3e-17}, {WavelengthNM: 545, FluxWM2Arcsec2: 3e-17}}
	for _, c := range []struct {
		name, want string
		stars      []scene.Source
		change     func(*sequence.Target)
	}{
		{"none", "the forecast has no star that no measurement is about", nil, nil},
		{"beyond", "source 0 lies beyond the field", []scene.Source{star(100, 0, 14)}, nil},
		{"other rows", "source 0 stands in rows that are in other use", []scene.Source{star(0, 0, 14)}, func(t *sequence.Target) {
			t.Closed = []sequence.ClosedRow{{First: 25, Last: 35}}
		}},
		{"full", "would fill its brightest pixel", []scene.Source{star(0, 0, 6)}, nil},
		{"faint", "source 0 is too faint: a frame has a S/N of", []scene.Source{star(0, 0, 23)}, nil},
		{"wanted rows", "lies in rows of blob, which is wanted", []scene.Source{star(0, 0, 16)}, func(t *sequence.Target) {
			t.Forecast.Wanted = []sequence.Wanted{{Name: "blob", EastArcsec: ptr(5.0), NorthArcsec: ptr(0.5), RadiusArcsec: ptr(1.0), BandNM: []float64{540, 560}}}
		}},
		{"wanted", "no star that no measurement is about", []scene.Source{star(0, 0, 16)}, func(t *sequence.Target) {
			t.Forecast.Wanted = []sequence.Wanted{{Name: "it", Source: ptr(0), BandNM: []float64{540, 560}}}
		}},
		{"between", "source 0 lies between two elements", []scene.Source{star(0, 0, 16)}, func(t *sequence.Target) {
			t.Code.V, t.Code.Dark, t.Code.ElementMirrors = ptr(31), ptr(15), 6
		}},
		{"dark columns", "the dark columns measure a frame's transmission to", []scene.Source{star(0, 0, 18)}, func(t *sequence.Target) {
			t.Forecast.Sky.Lines = lines
			t.Forecast.Sky.ContinuumABArcsec2 = ptr(19.0)
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			target, profile := starField(t, sequence.SourceRows{Sentinels: 1}, c.stars...)
			if c.change != nil {
				c.change(target)
			}
			s, summary := build(t, target, profile)
			require.Empty(t, s.Target.SentinelRows)
			text := strings.Join(summary.Warnings, "\n")
			require.Contains(t, text, "no sentinel rows are planned: ")
			require.Contains(t, text, c.want)
		})
	}
}

// A patch is laid on a star that saturates, or whose noise rules its rows, and on no other; it
// is the smallest that leaves neither; the star that is wanted stays open.
func TestPickedPatches(t *testing.T) {
	of := func(stars ...scene.Source) (*sequence.Sequence, *plan.Summary, *sequence.Target, *instrument.Profile) {
		target, profile := starField(t, sequence.SourceRows{Patches: 2}, stars...)
		s, summary := build(t, target, profile)
		return s, summary, target, profile
	}
	s, summary, _, _ := of(star(3, 2, 22))
	require.Empty(t, summary.Picked, "a faint star")
	require.Empty(t, s.Target.Closed)

	s, summary, target, profile := of(star(3, 2, 5), star(-4, -3, 22), star(-6, 4, 13.5))
	require.Len(t, summary.Picked, 2, summary.Warnings)
	require.Equal(t, []int{0, 2}, []int{summary.Picked[0].Source, summary.Picked[1].Source})
	require.Contains(t, summary.Picked[0].Why, "fills its brightest pixel")
	require.Contains(t, summary.Picked[1].Why, "times the variance")
	require.Less(t, summary.Forecast.Saturation.Electrons, trade.Fullest*summary.Forecast.Saturation.Limit)
	// By hand: the first star stands 2 arc seconds above the middle, 3 to smaller elements.
	a := profile.DMD.ArcsecPerMirror
	for _, r := range s.Target.Closed {
		require.NotNil(t, r.Element)
	}
	p := summary.Picked[0]
	require.InDelta(t, 29.5+2/a, float64(p.First+p.Last)/2, 1)
	require.InDelta(t, 23-3/(2*a), float64(p.Elements[0]+p.Elements[1])/2, 1)

	// A quarter of an FWHM less is not enough.
	words := strings.Fields(p.Why[strings.Index(p.Why, "mirrors within ")+len("mirrors within "):])
	size, err := strconv.ParseFloat(words[0], 64)
	require.NoError(t, err)
	bare := *target
	bare.FromSources = nil
	light, err := forecast.New(&bare, profile)
	require.NoError(t, err)
	c := forecast.Candidate{Family: s.Family, V: s.V, K: s.K, L: s.L, N: s.N(), ElementMirrors: 2, Dark: s.V - s.N(), DwellSeconds: target.DwellSeconds, Cycles: 1}
	smaller := trade.Covered(light, c, 0, (size-0.25)*1.2)
	bright, err := light.Brightest(smaller)
	require.NoError(t, err)
	ruled, err := light.Ruled(smaller, 0)
	require.NoError(t, err)
	require.True(t, bright.Source == 0 && bright.Electrons > trade.Fullest*bright.Limit || ruled > 0.25)

	// Wanted, it stays; more than may be shut is said.
	target.Forecast.Wanted = []sequence.Wanted{{Name: "it", Source: ptr(0), BandNM: []float64{540, 560}}}
	s, summary = build(t, target, profile)
	for _, p := range summary.Picked {
		require.NotEqual(t, 0, p.Source)
	}
	require.Contains(t, strings.Join(summary.Warnings, "\n"), "will saturate")
	target.Forecast.Wanted, target.FromSources = nil, &sequence.SourceRows{Patches: 1}
	_, summary = build(t, target, profile)
	require.Contains(t, strings.Join(summary.Warnings, "\n"), "source 2 gives the other elements")
	require.NotNil(t, s)
}

// from_sources without a forecast is refused.
func TestFromSourcesRefused(t *testing.T) {
	target, profile := demo(t)
	target.FromSources = &sequence.SourceRows{Sentinels: 1}
	_, _, err := plan.Build(context.Background(), target, profile)
	require.ErrorContains(t, err, "from_sources: rows are chosen by the sources of the forecast, and the target has none")
}

// The embedded example uses all of it: a field beside the middle, its rows, a sentinel and a
// patch; and its light falls where nothing is warned of.
func TestCornerExample(t *testing.T) {
	target, err := sequence.LoadTarget("demo-corner")
	require.NoError(t, err)
	profile, err := instrument.Load("optical")
	require.NoError(t, err)
	s, summary := build(t, target, profile)
	require.InDelta(t, 60, s.FieldCenterU()-profile.UCenter(), 0.5)
	var uses []string
	for _, p := range summary.Picked {
		uses = append(uses, p.Use)
	}
	require.Equal(t, []string{sequence.UseSentinel, sequence.UseClosed}, uses)
	require.Less(t, summary.Forecast.Saturation.Electrons, summary.Forecast.Saturation.Limit)
	require.Equal(t, sequence.RowRange{First: 0, Last: 29, Use: sequence.UseClosed, Element: -1}, s.Rows[0])
	for _, w := range summary.Warnings {
		require.NotContains(t, w, "wavelength grid")
	}
}
