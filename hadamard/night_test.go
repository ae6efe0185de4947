package hadamard

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/stat/distuv"
)

// fieldLight gives the light of element j of n at pixel p of pixels, mean about 1.
type fieldLight func(j, n, p, pixels int, rng *rand.Rand) float64

// fields differ in how many independent spatial profiles their pixels show, which is
// what decides how well dark columns measure throughput.
var fields = map[string]fieldLight{
	// Every pixel a profile of its own, as sky lines and a rich field give.
	"field": func(_, _, _, _ int, rng *rand.Rand) float64 { return rng.ExpFloat64() },
	// One narrow line that crosses the elements from pixel to pixel.
	"lines": func(j, n, p, _ int, _ *rand.Rand) float64 {
		return 0.2 + 5*math.Exp(-math.Pow(float64(j-p*7%n), 2)/4)
	},
	"five stars": func(j, n, p, _ int, _ *rand.Rand) float64 {
		if j%(n/5) != 2 {
			return 0
		}
		return float64(n) / 5 * (1 + math.Sin(float64(p*j)/17))
	},
	"one star": func(j, n, _, _ int, _ *rand.Rand) float64 {
		if j != n/3 {
			return 0
		}
		return float64(n)
	},
	"continuum": func(j, n, p, pixels int, _ *rand.Rand) float64 {
		return 1 + 0.5*float64(j)/float64(n) + 0.3*float64(p)/float64(pixels)
	},
	"one profile": func(j, n, _, _ int, _ *rand.Rand) float64 {
		return 0.3 + math.Exp(-math.Pow(float64(j-n/2)/float64(n)*6, 2))
	},
}

// miniature is a night of one block of pixels.
type miniature struct {
	code    *Code
	decoder *Decoder
	checks  *Checks
	rng     *rand.Rand
	light   []float32 // [column][pixel]
	clean   []float32 // Wf [row][pixel]
	y, s2   []float32
	pixels  int
	read    float64
}

// newMiniature: light level so that the mean reading has the S/N snr, its noise half
// read noise where it is bright; the dark columns chosen, g of them.
func newMiniature(t testing.TB, c *Code, g, pixels int, snr float64, s fieldLight, seed uint64) *miniature {
	t.Helper()
	set, err := ChooseDark(context.Background(), c, g, seed)
	require.NoError(t, err)
	checks, err := NewChecks(c, set.Columns)
	require.NoError(t, err)
	m := &miniature{code: c, decoder: NewDecoder(c), checks: checks, pixels: pixels, rng: rand.New(rand.NewPCG(seed, 1))}
	v := c.V()
	m.light, m.clean = make([]float32, v*pixels), make([]float32, v*pixels)
	m.y, m.s2 = make([]float32, v*pixels), make([]float32, v*pixels)
	dark := make([]bool, v)
	for _, j := range set.Columns {
		dark[j] = true
	}
	// A mean reading x with x^2 = snr^2 (x + read^2), read noise of 3 electrons at
	// least: with less, single photons at low S/N are no Gaussian noise.
	m.read = max(3, math.Sqrt2*snr)
	reading := (snr*snr + snr*math.Sqrt(snr*snr+4*m.read*m.read)) / 2
	level := reading / (float64(v-g) * float64(c.K()) / float64(v))
	place := 0
	for j := range v {
		if dark[j] {
			continue
		}
		for p := range pixels {
			m.light[j*pixels+p] = float32(level * s(place, v-g, p, pixels, m.rng))
		}
		place++
	}
	m.decoder.Predict(m.clean, m.light, pixels, pixels)
	return m
}

// expose draws the readings under a throughput (nil: 1) and their variances, which
// follow the noisy readings as in real nights.
func (m *miniature) expose(throughput []float64) {
	for k := range m.code.V() {
		c := 1.0
		if throughput != nil {
			c = throughput[k]
		}
		for p := range m.pixels {
			mean := c * float64(m.clean[k*m.pixels+p])
			y := mean + m.read*m.rng.NormFloat64() + math.Sqrt(max(mean, 0))*m.rng.NormFloat64()
			if mean < 50 {
				y = distuv.Poisson{Lambda: max(mean, 1e-9), Src: m.rng}.Rand() + m.read*m.rng.NormFloat64()
			}
			m.y[k*m.pixels+p] = float32(y)
			m.s2[k*m.pixels+p] = float32(m.read*m.read + y)
		}
	}
}

func (m *miniature) gram() *Gram {
	g := NewGram(m.code.V())
	g.Add(m.y, m.s2, m.pixels, m.pixels, float32(m.read*m.read))
	return g
}

// drift draws a throughput of mean 1: independent rms and a linear trend of a span, in
// a shuffled order; times are those of the prior.
func (m *miniature) drift(rms, span float64) (c, times []float64) {
	v := m.code.V()
	c, times = make([]float64, v), make([]float64, v)
	sum := 0.0
	for at, k := range m.rng.Perm(v) {
		times[k] = float64(at)/float64(v-1) - 0.5
		c[k] = 1 + rms*m.rng.NormFloat64() + span*times[k]
		sum += c[k] / float64(v)
	}
	for k := range c {
		c[k] /= sum
	}
	return c, times
}
