package trial

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// A Gaussian is found where it is, from a start at its brightest voxel; noise that
// leaves no line is no fit.
func TestFitLine(t *testing.T) {
	voxels, weights := make([]float64, 9), make([]float64, 9)
	for i := range voxels {
		voxels[i], weights[i] = float64(i+20), 1
	}
	line := func(f lineFit) []float64 {
		values := make([]float64, len(voxels))
		for i, l := range voxels {
			u := (l - f.center) / f.sigma
			values[i] = f.height*math.Exp(-u*u/2) + f.level
		}
		return values
	}
	want := lineFit{height: 50, center: 24.3, sigma: 1.5, level: 7}
	got, ok := fitLine(voxels, line(want), weights, 4)
	require.True(t, ok)
	require.InDelta(t, want.center, got.center, 1e-6)
	require.InDelta(t, want.sigma, got.sigma, 1e-6)
	require.InDelta(t, want.height, got.height, 1e-5)
	require.InDelta(t, want.level, got.level, 1e-5)
	twice := line(want)
	for i := range twice {
		twice[i] = 2*twice[i] + 3
	}
	require.InDelta(t, 100, want.heightOf(voxels, twice, weights), 1e-9)
	_, ok = fitLine(voxels, make([]float64, 9), weights, 4)
	require.False(t, ok)
}

// lineCube has a line of equal height in every spectrum, moved by shift voxels.
func lineCube(shift, gain, noise float64) *Cube {
	const n, rows, voxels = 30, 20, 40
	rng := rand.New(rand.NewPCG(9, 1))
	c := &Cube{N: n, Rows: rows, Voxels: voxels}
	for i := range n * rows * voxels {
		u := (float64(i/n/rows) - 20.2 - shift) / 1.45
		c.Signal = append(c.Signal, float32(gain*(400*math.Exp(-u*u/2)+30)+noise*rng.NormFloat64()))
		c.Variance = append(c.Variance, 25)
		c.Flags = append(c.Flags, 0)
	}
	return c
}

// A cube whose line is moved by 20 km/s, or 1 % too bright, is found out; one that
// agrees within its noise passes. N = 300 independent spectra of S/N 80 leave 0.1 km/s
// and 5e-4 of the flux.
func TestMeasureLine(t *testing.T) {
	g := instrument.Grid{FirstNM: 490, StepNM: 0.5, Count: 40}
	truth := lineCube(0, 1, 0).Signal
	nm := g.WavelengthNM(20.2)
	for _, c := range []struct {
		name          string
		shift, gain   float64
		velocity      float64
		holds, bright bool
	}{
		{"agrees", 0, 1, 0, true, true},
		{"moved", 20 / lightKmS * nm / 0.5, 1, 20, false, true},
		{"brighter", 0, 1.01, 0, false, false},
	} {
		cube := lineCube(c.shift, c.gain, 5)
		a, err := cube.MeasureLine(truth, g, nm)
		require.NoError(t, err, c.name)
		require.Equal(t, 600, a.N, c.name)
		require.InDelta(t, c.velocity, a.Velocity, 5*a.Error, c.name)
		require.InDelta(t, c.gain, a.Flux, 5*a.FluxError, c.name)
		require.Less(t, a.Error, 0.5, c.name)
		require.Equal(t, c.holds, AllHold(a.Findings(c.name)), c.name)
		require.Equal(t, c.bright, cube.WhiteLight(c.name, truth).OK, c.name)
	}
	_, err := lineCube(0, 1, 0).MeasureLine(make([]float32, len(truth)), g, nm)
	require.ErrorContains(t, err, "bright in 0 spectra")
}
