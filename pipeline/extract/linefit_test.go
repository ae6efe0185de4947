package extract

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// moments add up samples.
type moments struct{ n, sum, square float64 }

func (m *moments) Add(x float64) { m.n, m.sum, m.square = m.n+1, m.sum+x, m.square+x*x }
func (m moments) Mean() float64  { return m.sum / m.n }
func (m moments) Std() float64   { return math.Sqrt(m.square/m.n - m.Mean()*m.Mean()) }

// noisySpectrum draws voxels of a model under the noise of resampled pixels: each
// voxel is a weighted sum of its neighbours' pixels, which gives covariance as known.
func noisySpectrum(m *lineModel, p []float64, sigma float64, pcg *rand.Rand) (values, variance []float64, covariance [][]float64) {
	w := []float64{-0.08, 0.32, 0.62, 0.22, -0.08}
	n := len(m.edges) - 1
	values, variance, covariance = make([]float64, n), make([]float64, n), table[float64](n, Lags+1)
	m.eval(p, values, nil)
	pixels := make([]float64, n+len(w))
	for x := range pixels {
		pixels[x] = sigma * pcg.NormFloat64()
	}
	for l := range values {
		for k, a := range w {
			values[l] += a * pixels[l+k]
			for lag := range len(w) {
				if k-lag >= 0 && l+lag < n {
					covariance[l][lag] += sigma * sigma * a * w[k-lag]
				}
			}
		}
		variance[l] = covariance[l][0]
	}
	return values, variance, covariance
}

func modelOf(o LineOptions) *lineModel {
	g := instrument.Grid{FirstNM: 640, StepNM: 0.5, Count: 100}
	from, to, err := o.check(g)
	if err != nil {
		panic(err)
	}
	return o.model(g, from, to, "ct")
}

// Pulls of flux, velocity and width of 2000 drawn spectra have a standard deviation
// of 1, single lines and blends, tied and free; by the errors of independent voxels
// they would not.
func TestLinePulls(t *testing.T) {
	const spectra = 2000
	for name, c := range map[string]struct {
		o LineOptions
		p []float64
	}{
		"one line": {LineOptions{RestNM: []float64{656.461}}, []float64{70, 0.8, 900, 20, 3}},
		"blend":    {LineOptions{RestNM: []float64{656.461, 658.527, 654.986}}, []float64{-40, 0.75, 900, 500, 170, 20, -2}},
		"free":     {LineOptions{RestNM: []float64{656.461, 660.5}, Free: true}, []float64{-40, 90, 0.7, 0.9, 900, 600, 5, -2}},
	} {
		t.Run(name, func(t *testing.T) {
			m := modelOf(c.o)
			pcg := rand.New(rand.NewPCG(1, 2))
			var flux, velocity, width, naive moments
			for range spectra {
				values, variance, covariance := noisySpectrum(m, c.p, 9, pcg)
				f := m.fit(values, variance, covariance)
				require.Equal(t, Fitted, f.status)
				lines := m.lines(&f, 0)
				k := m.fluxAt(0)
				flux.Add((lines[0].Flux - c.p[k]) / lines[0].FluxErr)
				naive.Add((lines[0].Flux - c.p[k]) / lines[0].FluxNaiveErr)
				velocity.Add((lines[0].Velocity - c.p[0]) / lines[0].VelocityErr)
				toKmS := lines[0].Width / f.p[m.shapes()]
				width.Add((lines[0].Width - c.p[m.shapes()]*toKmS) / lines[0].WidthErr)
			}
			// Five standard errors of 2000 are 0.08.
			for what, pulls := range map[string]moments{"flux": flux, "velocity": velocity, "width": width} {
				require.InDelta(t, 1, pulls.Std(), 0.08, what)
				require.InDelta(t, 0, pulls.Mean(), 0.15, what)
			}
			require.Greater(t, naive.Std(), 1.08)
		})
	}
}

// A line without noise is found exactly, wherever it is in the range.
func TestLineWithoutNoise(t *testing.T) {
	for _, velocity := range []float64{-480, -133, 0, 260, 490} {
		m := modelOf(LineOptions{RestNM: []float64{656.461, 658.527}, MinSN: 5})
		p := []float64{velocity, 0.8, 1000, 300, 12, 1}
		values, variance, covariance := noisySpectrum(m, p, 0.01, rand.New(rand.NewPCG(1, 3)))
		f := m.fit(values, variance, covariance)
		require.Equal(t, Fitted, f.status)
		lines := m.lines(&f, 0)
		require.InDelta(t, velocity, lines[0].Velocity, 0.1)
		require.InDelta(t, 1000, lines[0].Flux, 0.3)
		require.InDelta(t, 0.8*fwhmPerSigma/656.461*lightKmS, lines[0].Width, 1.5)
	}
}

// What cannot be fitted says so.
func TestLineStatus(t *testing.T) {
	m := modelOf(LineOptions{RestNM: []float64{656.461}, MinSN: 5})
	values, variance, covariance := noisySpectrum(m, []float64{0, 0.8, 20, 0, 0}, 9, rand.New(rand.NewPCG(1, 4)))
	f := m.fit(values, make([]float64, len(variance)), covariance)
	require.Equal(t, NoData, f.status)
	f = m.fit(values, variance, covariance)
	lines := m.lines(&f, 0)
	if f.covariance != nil {
		require.Equal(t, BelowMinSN, f.status)
		require.False(t, math.IsNaN(lines[0].Flux))
	}
	require.True(t, math.IsNaN(lines[0].Velocity))
	for _, o := range []LineOptions{{}, {RestNM: []float64{500}}, {RestNM: []float64{656, 656.01}}, {RestNM: []float64{-1}}, {RestNM: []float64{656}, WindowNM: 0.5}, {RestNM: []float64{656}, VelocityKmS: 2e5}} {
		_, _, err := o.check(instrument.Grid{FirstNM: 640, StepNM: 0.5, Count: 100})
		require.Error(t, err)
	}
}
