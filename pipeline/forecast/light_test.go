package forecast

import (
	"context"
	"fmt"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// wide is the embedded optical profile grown to 1024 mirrors a row and a detector of 2048
// columns, under the demo's sky, wanting bands and lines.
func wide(t testing.TB) *Light {
	sky, err := scene.Load("demo")
	require.NoError(t, err)
	var wanted []sequence.Wanted
	for i := 1; i < 6; i++ {
		source := i
		wanted = append(wanted, sequence.Wanted{Name: fmt.Sprint("star ", i), Source: &source, BandNM: []float64{560, 600}})
	}
	ring, nm := 0, 500.887
	wanted = append(wanted, sequence.Wanted{Name: "ring", Source: &ring, LineNM: &nm})
	return newTestLight(t, "optical", "demo", *sky, wanted, func(p *instrument.Profile, _ *sequence.Target) {
		p.DMD.Columns, p.DMD.Rows = 1024, 1024
		d := &p.Detector
		d.Columns, d.Rows = 2048, 1200
		d.Amplifiers = d.Amplifiers[:1]
		d.Amplifiers[0].Data, d.Amplifiers[0].Overscan = instrument.Section{1, 2048, 1, 1200}, nil
		p.Spectrograph.XCenterPx, p.Spectrograph.YCenterPx = 1023.5, 599.5
		p.Spectrograph.SmilePerPx, p.Spectrograph.TraceTilt, p.Spectrograph.TraceCurvePerPx = 1e-6, 0.003, 1e-7
	})
}

// BenchmarkForecast is one candidate of v = 1023 from the start, the target's demo sky and six
// measurements, and the next of the same elements.
func BenchmarkForecast(b *testing.B) {
	c := Candidate{Family: "m-sequence", V: 1023, N: 895, Dark: 128, ElementMirrors: 1, DwellSeconds: 60, Cycles: 1}
	l := wide(b)
	for _, name := range []string{"first", "next"} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if name == "first" {
					l = wide(b)
				}
				_, err := l.Of(context.Background(), c)
				require.NoError(b, err)
			}
		})
	}
}

// The same candidate gives the same forecast, whether its light was worked out for it or for
// another.
func TestForecastsRepeat(t *testing.T) {
	c := Candidate{Family: "m-sequence", V: 63, N: 47, Dark: 16, ElementMirrors: 2, DwellSeconds: 60, Cycles: 1}
	other := Candidate{Family: "legendre", V: 107, N: 94, Dark: 13, ElementMirrors: 1, DwellSeconds: 60, Cycles: 1}
	sky, err := scene.Load("demo")
	require.NoError(t, err)
	star, ring, nm := 1, 0, 500.887
	radius := 2.0
	wanted := []sequence.Wanted{
		{Name: "star", Source: &star, BandNM: []float64{560, 570}},
		{Name: "middle", Source: &ring, RadiusArcsec: &radius, LineNM: &nm},
	}
	fresh := newTestLight(t, "optical", "demo", *sky, wanted, nil)
	want, err := fresh.Of(context.Background(), c)
	require.NoError(t, err)
	used := newTestLight(t, "optical", "demo", *sky, wanted, nil)
	half, err := used.Of(context.Background(), other) // the same strip in elements half as wide
	require.NoError(t, err)
	got, err := used.Of(context.Background(), c)
	require.NoError(t, err)
	require.Equal(t, want, got)
	require.InEpsilon(t, want.Wanted[1].Signal, half.Wanted[1].Signal, 0.06, "a circle holds the same light, but for cells that it cuts")
	for _, m := range want.Wanted {
		require.InDelta(t, m.Variance.Level, m.Levels.total(), 1e-12)
		require.Greater(t, m.ResponseSigma, 0.0)
		sum := 0.0
		for _, c := range m.Spectrum {
			require.True(t, c.WavelengthNM > m.FromNM-0.5 && c.WavelengthNM < m.ToNM+0.5)
			sum += c.VoxelSNR
		}
		if !m.Line { // 10 nm of 0.5, two voxels cut in half: all the rest count alike
			require.Len(t, m.Spectrum, 21)
			sum -= (m.Spectrum[0].VoxelSNR + m.Spectrum[20].VoxelSNR) / 2
			require.InEpsilon(t, m.VoxelSNR, sum/20, 1e-6)
		}
	}
	require.InEpsilon(t, want.Wanted[1].Voxels*2, half.Wanted[1].Voxels, 0.03)
}

// What is no candidate is refused in words.
func TestCandidatesRefused(t *testing.T) {
	l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1}, nil, nil)
	good := Candidate{Family: "m-sequence", V: 63, N: 47, Dark: 16, ElementMirrors: 2, DwellSeconds: 60, Cycles: 1}
	r, err := l.Of(context.Background(), good)
	require.NoError(t, err)
	require.Empty(t, r.Wanted)
	for want, change := range map[string]func(c *Candidate){
		"no m-sequence code has v = 64":                      func(c *Candidate) { c.V = 64 },
		"are no use of a code of 63 columns":                 func(c *Candidate) { c.N = 48 },
		"span 470 where the device has 256":                  func(c *Candidate) { c.ElementMirrors = 10 },
		"no code has v = 63, k = 30, l = 3":                  func(c *Candidate) { c.K, c.L = 30, 3 },
		"1 cycles of 0 s are no exposures":                   func(c *Candidate) { c.DwellSeconds = 0 },
		"0 cycles of 60 s are no exposures; give positive n": func(c *Candidate) { c.Cycles = 0 },
	} {
		c := good
		change(&c)
		_, err := l.Of(context.Background(), c)
		require.ErrorContains(t, err, want)
	}
	none, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	_, err = New(none, l.profile)
	require.EqualError(t, err, "forecast: the target says nothing of what to expect; add the key")
}

// A line where no source has one, and wavelengths beyond the grid, are refused by key.
func TestWantedRefused(t *testing.T) {
	p, err := instrument.Load("optical")
	require.NoError(t, err)
	target, err := sequence.LoadTarget("demo")
	require.NoError(t, err)
	zero := 0
	for want, w := range map[string]sequence.Wanted{
		"forecast.wanted[0].line_nm: no line of its sources is seen at 520 nm": {Name: "a", Source: &zero, LineNM: magnitude(520)},
		"forecast.wanted[0]: 470 to 490 nm reach beyond the profile's grid":    {Name: "a", Source: &zero, BandNM: []float64{470, 490}},
	} {
		target.Forecast = &sequence.Forecast{SeeingFWHMArcsec: 1, Aim: sequence.AimMean, Wanted: []sequence.Wanted{w},
			Sources: []scene.Source{{Kind: scene.KindStar, ABMag: magnitude(17), AtNM: 550, Lines: []scene.Line{{WavelengthNM: 500, FluxWM2: 1e-16}}}}}
		_, err = New(target, p)
		require.ErrorContains(t, err, want)
	}
}

// The time of a candidate's frames and of the slit scan that fills it, counted by hand.
func TestTimes(t *testing.T) {
	loads := 0.5
	l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1}, nil, func(p *instrument.Profile, g *sequence.Target) {
		p.DMD.LoadS = &loads
		g.AllOffEvery = 21
		g.Calibration = sequence.Calibration{Bias: sequence.BiasFrames{Count: 10}, Flat: sequence.FlatFrames{Count: 2, DwellSeconds: 5, Lamp: "halogen", CodedCycles: 1}, Arc: sequence.ArcFrames{Count: 1, Every: 5, DwellSeconds: 8, Lamp: "Ne"}}
	})
	c := Candidate{Family: "m-sequence", V: 63, N: 47, Dark: 16, ElementMirrors: 2, DwellSeconds: 60, Cycles: 2}
	got := l.Time(c)
	const overhead = 4.5
	off := 1 + 6 // of 126 steps
	require.Equal(t, [2]int{126, off}, [2]int{got.Steps, got.AllOff})
	require.InDelta(t, float64(126+off)*(60+overhead), got.ScienceSeconds, 1e-9)
	// Arcs of elements 0, 5 ... 45 and 46.
	require.InDelta(t, 10*overhead+(8+63)*(5+overhead)+11*(8+overhead), got.CalibrationSeconds, 1e-9)
	require.Equal(t, 10+71+11+126+off, got.Frames)
	dwell := l.slitDwell(47, 1, got.ScienceSeconds) // 47 steps, 1 + 3 all-off frames
	require.Equal(t, 163.0, dwell, "8578.5 s / 51 - 4.5 s = 163.7 s, down to three digits")
}

// A bright star saturates a long dwell; the sky and the source are told apart, and the slit
// scan takes as many cycles as it needs.
func TestSaturation(t *testing.T) {
	sky := scene.Scene{SeeingFWHMArcsec: 1.2, Sources: []scene.Source{
		{Kind: scene.KindStar, EastArcsec: 20, NorthArcsec: 3, ABMag: magnitude(16), AtNM: 550},
		{Kind: scene.KindStar, EastArcsec: -8, NorthArcsec: -5, ABMag: magnitude(10), AtNM: 550},
	}, Sky: scene.Sky{ContinuumABArcsec2: magnitude(21)}}
	l := newTestLight(t, "optical", "demo", sky, nil, nil)
	c := Candidate{Family: "m-sequence", V: 127, N: 111, Dark: 16, ElementMirrors: 2, DwellSeconds: 90, Cycles: 1}
	r, err := l.Of(context.Background(), c)
	require.NoError(t, err)
	require.Equal(t, 1, r.Saturation.Source)
	require.Greater(t, r.Saturation.SourceFraction, 0.9)
	c.DwellSeconds = r.Saturation.LongestDwellSeconds * 0.999
	just, err := l.Of(context.Background(), c)
	require.NoError(t, err)
	require.False(t, just.Saturation.Saturated())
	c.DwellSeconds = r.Saturation.LongestDwellSeconds * 1.001
	over, err := l.Of(context.Background(), c)
	require.NoError(t, err)
	require.True(t, over.Saturation.Saturated())
	require.False(t, over.Slit.Saturation.Saturated())
}
