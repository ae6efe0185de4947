package calib

import (
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/stat/distuv"
	"mirrorloom/internal/outside"
)

// Frames made by numpy: gain and read noise within 1 % of what went in, and of what
// numpy finds in the same frames; with struck pixels as well.
func TestCrosscheckTransfer(t *testing.T) {
	for i, c := range []struct{ gain, read, struck float64 }{{1.28, 2.9, 0}, {1.35, 3.2, 3}, {4, 16, 1}} {
		const rows, columns = 150, 320
		path := filepath.Join(t.TempDir(), "pairs")
		out := outside.Python(t, "calib_transfer.py", path, fmt.Sprint(c.gain), fmt.Sprint(c.read),
			fmt.Sprint(rows), fmt.Sprint(columns), fmt.Sprint(c.struck), fmt.Sprint(100+i))
		var numpy struct{ Gain, ReadNoise float64 }
		require.NoError(t, json.Unmarshal([]byte(out), &numpy))
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		values := make([]float32, len(data)/4)
		_, err = binary.Decode(data, binary.LittleEndian, values)
		require.NoError(t, err)
		var pairs []Pair
		for at := 0; at < len(values); at += 2 * rows * columns {
			pairs = append(pairs, Pair{A: values[at : at+rows*columns], B: values[at+rows*columns : at+2*rows*columns], Width: columns, Dark: len(pairs) < 2})
		}
		require.Len(t, pairs, 4)
		got, err := DefaultTransferRule().Measure(pairs)
		require.NoError(t, err)
		t.Logf("gain %.4f +- %.4f (truth %g, numpy %.4f), read noise %.3f +- %.3f (truth %g, numpy %.3f), chi2 %.2f, %d clipped",
			got.Gain, got.GainError, c.gain, numpy.Gain, got.ReadNoise, got.ReadNoiseError, c.read, numpy.ReadNoise, got.Chi2, got.Clipped)
		require.InEpsilon(t, c.gain, got.Gain, 0.01)
		require.InEpsilon(t, c.read, got.ReadNoise, 0.01)
		require.InEpsilon(t, numpy.Gain, got.Gain, 0.01)
		require.InEpsilon(t, numpy.ReadNoise, got.ReadNoise, 0.01)
		require.Less(t, got.GainError, 0.01*c.gain)
	}
}

// poissonPair is a small pair, lit from 0 to brightest.
func poissonPair(rng *rand.Rand, gain, read, brightest float64) Pair {
	const width, rows = 60, 40
	p := Pair{A: make([]float32, width*rows), B: make([]float32, width*rows), Width: width, Dark: brightest == 0}
	for _, f := range [][]float32{p.A, p.B} {
		for i := range f {
			e := brightest * float64(i%width) / width
			if e > 0 {
				e = distuv.Poisson{Lambda: e, Src: rng}.Rand()
			}
			f[i] = float32(math.Round((e + read*rng.NormFloat64()) / gain))
		}
	}
	return p
}

// The stated errors against the scatter of N = 200 measurements, and no bias beyond
// a quarter of the error.
func TestTransferErrorMonteCarlo(t *testing.T) {
	const trials, gain, read = 200, 1.5, 4.0
	rng := rand.New(rand.NewPCG(4, 2))
	var g, g2, r, r2 float64
	for range trials {
		got, err := DefaultTransferRule().Measure([]Pair{poissonPair(rng, gain, read, 20000), poissonPair(rng, gain, read, 0)})
		require.NoError(t, err)
		pull := (got.Gain - gain) / got.GainError
		g += pull / trials
		g2 += pull * pull / trials
		pull = (got.ReadNoise - read) / got.ReadNoiseError
		r += pull / trials
		r2 += pull * pull / trials
	}
	t.Logf("pulls: gain %.2f, squared %.2f; read noise %.2f, squared %.2f; +- %.2f and %.2f", g, g2, r, r2, 1/math.Sqrt(trials), math.Sqrt(2.0/trials))
	require.InDelta(t, 0, g, 0.25+5/math.Sqrt(trials))
	require.InDelta(t, 0, r, 0.25+5/math.Sqrt(trials))
	require.InDelta(t, 1, g2, 5*math.Sqrt(2.0/trials))
	require.InDelta(t, 1, r2, 5*math.Sqrt(2.0/trials))
}

// Flagged pixels do not count, a detector that is not linear shows in Chi2, and what
// fixes nothing is an error.
func TestTransferGuards(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 3))
	flat, bias := poissonPair(rng, 1.5, 4, 40000), poissonPair(rng, 1.5, 4, 0)
	flat.Flags = make([]Flag, len(flat.A))
	for i := range flat.A {
		if i%3 == 0 {
			flat.A[i], flat.Flags[i] = 60000, Saturated
		}
	}
	got, err := DefaultTransferRule().Measure([]Pair{flat, bias})
	require.NoError(t, err)
	require.InDelta(t, 1.5, got.Gain, 5*got.GainError)
	require.Less(t, got.Chi2, 2.5)

	bent := poissonPair(rng, 1.5, 4, 40000)
	for _, f := range [][]float32{bent.A, bent.B} {
		for i, v := range f {
			f[i] = v * (1 - 0.3*v/27000)
		}
	}
	got, err = DefaultTransferRule().Measure([]Pair{bent, bias})
	require.NoError(t, err)
	require.Greater(t, got.Chi2, 4.0)

	_, err = DefaultTransferRule().Measure([]Pair{bias})
	require.ErrorIs(t, err, ErrNoLight)
	_, err = DefaultTransferRule().Measure(nil)
	require.ErrorIs(t, err, ErrNoLight)
	_, err = DefaultTransferRule().Measure([]Pair{{A: make([]float32, 9), B: make([]float32, 9), Width: 4}})
	require.ErrorContains(t, err, "pair 1")
}
