package physics

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/stat/distuv"
)

// Values that follow by hand from the formulas of Garnett and Forrest (1993) and
// Fowler and Gatley (1990): a ramp of two reads is a double read; a long ramp has
// sqrt(12/n) of the read noise and 6/5 of the photon variance; Fowler-8 halves it.
func TestReadModeLimits(t *testing.T) {
	double, err := ReadMode{Kind: DoubleRead}.Noise()
	require.NoError(t, err)
	two, err := ReadMode{Kind: RampRead, Reads: 2}.Noise()
	require.NoError(t, err)
	require.Equal(t, double, two)
	one, err := ReadMode{Kind: FowlerRead, Reads: 1}.Noise()
	require.NoError(t, err)
	require.Equal(t, double, one)
	long, err := ReadMode{Kind: RampRead, Reads: 1200}.Noise()
	require.NoError(t, err)
	require.InDelta(t, 0.01, long.Read, 1e-4)
	require.InDelta(t, 1.2, long.Photon, 2e-3)
	r, err := ReadMode{Kind: FowlerRead, Reads: 8}.EffectiveReadNoise(16)
	require.NoError(t, err)
	require.InDelta(t, 8, r, 1e-12)
	none, err := ReadMode{}.Noise()
	require.NoError(t, err)
	require.Equal(t, EffectiveNoise{1, 1}, none)
	r, err = ReadMode{Kind: SingleRead}.EffectiveReadNoise(16)
	require.NoError(t, err)
	require.Equal(t, 16.0, r)
	for _, m := range []ReadMode{{Kind: "triple"}, {Kind: RampRead, Reads: 1}, {Kind: FowlerRead}, {Kind: FowlerRead, Reads: 8, Spacing: 0.2}, {Kind: FowlerRead, Reads: 8, Spacing: -1}} {
		_, err := m.Noise()
		require.Error(t, err)
		_, err = m.EffectiveReadNoise(1)
		require.Error(t, err)
	}
}

// Ramps of photons that arrive one by one and are read with noise, reduced read by
// read: N = 20000 (standard error 1 %).
func TestReadModeMonteCarlo(t *testing.T) {
	const trials, charge, read = 20000, 200.0, 10.0
	rng := rand.New(rand.NewPCG(1, 4))
	for _, m := range []ReadMode{
		{Kind: SingleRead}, {Kind: DoubleRead},
		{Kind: FowlerRead, Reads: 4, Spacing: 0.1}, {Kind: FowlerRead, Reads: 8, Spacing: 0.125},
		{Kind: RampRead, Reads: 3}, {Kind: RampRead, Reads: 16},
	} {
		times, weights := m.reads()
		var sum, square float64
		for range trials {
			collected, last, value := 0.0, 0.0, 0.0
			for i, at := range times {
				if at > last {
					collected += distuv.Poisson{Lambda: charge * (at - last), Src: rng}.Rand()
					last = at
				}
				value += weights[i] * (collected + read*rng.NormFloat64())
			}
			sum += value / trials
			square += value * value / trials
		}
		noise, err := m.Noise()
		require.NoError(t, err)
		expected := noise.Read*read*read + noise.Photon*charge
		t.Logf("%s %d: mean %.2f, variance %.1f, formula %.1f", m.Kind, m.Reads, sum, square-sum*sum, expected)
		require.InDelta(t, charge, sum, 5*math.Sqrt(expected/trials))
		require.InEpsilon(t, expected, square-sum*sum, 5*math.Sqrt(2.0/trials))
	}
}

// reads are the times of a mode's reads and the weights with which they make the
// charge: the differences of means, or the slope of the least-squares line times its
// length, written from their definitions.
func (m ReadMode) reads() (times, weights []float64) {
	n := float64(m.Reads)
	switch m.Kind {
	case SingleRead:
		return []float64{1}, []float64{1}
	case DoubleRead:
		return []float64{0, 1}, []float64{-1, 1}
	case FowlerRead:
		for _, group := range []float64{0, 1} {
			for i := range m.Reads {
				times = append(times, group+float64(i)*m.Spacing)
				weights = append(weights, (2*group-1)/n)
			}
		}
	case RampRead:
		square := 0.0
		for i := range m.Reads {
			u := float64(i)/(n-1) - 0.5
			square += u * u
		}
		for i := range m.Reads {
			u := float64(i)/(n-1) - 0.5
			times = append(times, u+0.5)
			weights = append(weights, u/square)
		}
	}
	return times, weights
}
