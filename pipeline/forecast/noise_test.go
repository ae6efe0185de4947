package forecast

import (
	"context"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// evenNoise is the noise model of a candidate under the same light in every pixel: overlap
// electrons a frame of one second of all elements, quiet the variance of a frame without.
func evenNoise(t testing.TB, c Candidate, overlap, quiet, dark float64, frames sequence.Calibration, allOffEvery int) *noiseModel {
	l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1}, nil, func(p *instrument.Profile, g *sequence.Target) {
		for i := range p.Detector.Amplifiers {
			a := &p.Detector.Amplifiers[i]
			a.GainEPerADU = 1e-6
			a.ReadNoiseE = math.Sqrt(quiet)
			a.BiasADU = 0
		}
		p.Detector.DarkEPerS = dark
		g.Calibration, g.AllOffEvery = frames, allOffEvery
	})
	c.DwellSeconds, c.ElementMirrors = 1, 1
	c, err := l.resolved(c)
	require.NoError(t, err)
	f := l.field(c, sight{})
	for q := -20; q < l.profile.Detector.Rows+20; q++ {
		r := f.row(q)
		for x := range r.overlap {
			r.overlap[x], r.leak[x] = overlap, 0
		}
	}
	return newNoiseModel(l, f, c, taken{cycles: float64(c.Cycles)})
}

// The CCD equation's worked value: N* = 10000 in 10 pixels with sky 50, dark 2 and read
// noise 5 each give S/N 96.358970 (the equation of Mortara & Fowler 1981 and Howell 1989,
// computed with numpy). A slit scan is such an exposure.
func TestCCDEquation(t *testing.T) {
	const star, pixels, sky, dark, read = 10000.0, 10, 50.0, 2.0, 5.0
	n := evenNoise(t, Candidate{Family: "slit-scan", V: 7, N: 7, Cycles: 1}, 7*(sky+star/pixels), read*read, dark, sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}, 0)
	variance := 0.0
	for x := range pixels {
		p := n.at(300+x, 90, sky+star/pixels)
		variance += p.variance()
	}
	require.InEpsilon(t, 96.358970, star/math.Sqrt(variance), 1e-7)
	// Four cycles, each as long: SIGNAL is their mean.
	n.cycles = 4
	p := n.at(300, 90, sky+star/pixels)
	require.InEpsilon(t, variance/pixels/4, p.variance(), 1e-9)
}

// A pixel of any family is what hadamard.Design says.
func TestPixelsAreTheDesigns(t *testing.T) {
	for _, c := range []Candidate{
		{Family: "m-sequence", V: 63, N: 47, Dark: 16, Cycles: 1}, {Family: "slit-scan", V: 50, N: 50, Cycles: 1},
		{Family: "planar", V: 57, K: 8, L: 1, N: 50, Dark: 7, Cycles: 1},
	} {
		n := evenNoise(t, c, 4000, 30, 3, sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}, 0)
		n.pedestal = 0
		p := n.at(10, 20, 120)
		want := n.design.Variance(hadamard.Exposure{Element: 120, Total: 4000, Pedestal: 3, ReadVariance: 30})
		require.InEpsilon(t, want, p.variance(), 1e-9, c.Family)
	}
}

// What is taken off all frames: the mean of so many all-off frames, a constant that decodes
// to 1/k of itself; or of dark frames, scaled.
func TestLevels(t *testing.T) {
	c := Candidate{Family: "m-sequence", V: 63, N: 47, Dark: 16, Cycles: 1}
	frames := sequence.Calibration{Bias: sequence.BiasFrames{Count: 10}, Dark: sequence.DarkFrames{Count: 4, DwellSeconds: 2}, Arc: sequence.ArcFrames{Every: 1}}
	off := evenNoise(t, c, 4000, 30, 3, frames, 21) // 1 + 3 frames
	level := off.level(30, 0.5)
	require.InEpsilon(t, (30+3+0.5)/4/(32*32), level.AllOff, 1e-12)
	require.Equal(t, level.AllOff, level.total())
	darks := evenNoise(t, c, 4000, 30, 3, frames, 0)
	level = darks.level(30, 0.5)
	require.InEpsilon(t, 0.25*(30+6)/4/(32*32), level.Dark, 1e-12)
	require.InEpsilon(t, 0.25*30/10/(32*32), level.Bias, 1e-12)
	require.Zero(t, level.AllOff+level.DarkColumns)
}

// The sum of all v columns of a pixel is sum(y)/k: its variance is that of v frames over
// k^2, whatever the code and the light. So must be the formulas' variances and covariances.
func TestCovariancesAddUp(t *testing.T) {
	designs := []Candidate{
		{Family: "m-sequence", V: 31}, {Family: "legendre", V: 23}, {Family: "twin-prime", V: 35},
		{Family: "planar", V: 31, K: 6, L: 1}, {Family: "complement", V: 13, K: 9, L: 6}, {Family: "slit-scan", V: 17},
	}
	models := map[string]*noiseModel{}
	for _, c := range designs {
		c.N, c.Cycles = c.V, 1
		models[fmt.Sprint(c.V, c.K)] = evenNoise(t, c, 0, 1, 0, sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}}, 0)
	}
	rapid.Check(t, func(t *rapid.T) {
		c := rapid.SampledFrom(designs).Draw(t, "design")
		n := models[fmt.Sprint(c.V, c.K)]
		quiet := rapid.Float64Range(0, 100).Draw(t, "quiet")
		light := rapid.SliceOfN(rapid.Float64Range(0, 1000), c.V, c.V).Draw(t, "light")
		total := 0.0
		for _, f := range light {
			total += f
		}
		const x, y = 100, 50
		n.light.camera.quiet = []float64{quiet, quiet}
		n.field.pixelRow(y).overlap[x] = total
		var sum Parts
		var o overlapped
		o.overlap = total
		for _, f := range light {
			p := n.at(x, y, f)
			sum.Photons += p.own.Photons
			sum.Detector += p.own.Detector
			o.weight++
			o.square++
			o.light += f
			o.squareLight += f
		}
		n.addShared(&sum, new(Levels), x, y, &o)
		k := float64(n.design.K)
		require.InDelta(t, float64(c.V)*quiet/(k*k), sum.Detector, 1e-9*(1+quiet))
		require.InDelta(t, total/k, sum.Photons, 1e-9*(1+total))
	})
}

// Between two elements, in the mean over all pairs of columns and the places of the light,
// the covariance is the closed form: counted on a real code.
func TestCovarianceOfACode(t *testing.T) {
	for _, c := range []Candidate{{Family: "m-sequence", V: 15}, {Family: "legendre", V: 19}} {
		code, err := hadamard.New(hadamard.Family(c.Family), c.V)
		require.NoError(t, err)
		open, closed := code.InverseEntries()
		a := func(i, j int) float64 {
			if code.Bit(i, j) == 1 {
				return open
			}
			return closed
		}
		// All light is in one column m, of which i and j are none.
		const light = 100.0
		sum, pairs := 0.0, 0
		for m := range c.V {
			for i := range c.V {
				for j := range c.V {
					if i == j || i == m || j == m {
						continue
					}
					pairs++
					for k := range c.V {
						sum += a(k, i) * a(k, j) * light * float64(code.Bit(k, m))
					}
				}
			}
		}
		d := code.Design()
		want := -float64(d.L) / (float64(d.K) * float64(d.K-d.L) * float64(d.V-2)) * light
		require.InEpsilon(t, want, sum/float64(pairs), 1e-9, c.Family)
	}
}

// Of a scatter of 2 %, dark columns leave little under bright lines of the sky, which fall on
// other elements at every pixel, all under no light, and a part under a bright continuum, which
// lights all frames in one pattern; too few of them leave all.
func TestThroughputLeft(t *testing.T) {
	left := func(mag, line float64, dark int) float64 {
		sky := scene.Sky{ContinuumABArcsec2: &mag}
		for nm := 482.0; nm < 680; nm += 9 {
			sky.Lines = append(sky.Lines, scene.SkyLine{WavelengthNM: nm, FluxWM2Arcsec2: line})
		}
		l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1, Sky: sky}, nil,
			func(_ *instrument.Profile, g *sequence.Target) { g.Forecast.ThroughputRMS = 0.02 })
		c, err := l.resolved(Candidate{Family: "m-sequence", V: 127, N: 127 - dark, Dark: dark, ElementMirrors: 2, DwellSeconds: 90, Cycles: 1})
		require.NoError(t, err)
		left, err := l.throughputLeft(context.Background(), l.field(c, sight{}), c)
		require.NoError(t, err)
		return left.rms
	}
	require.Less(t, left(22, 1e-16, 16), 0.005)
	require.Equal(t, 0.02, left(35, 0, 16))
	require.InDelta(t, 0.012, left(18, 0, 16), 0.008)
	require.Equal(t, 0.02, left(22, 1e-16, 2), "too few dark columns measure nothing")
}
