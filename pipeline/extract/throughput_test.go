package extract

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Errors of the steps' throughput are common to all pixels: a sum errs by what each
// step, off by its error, moves it. PIXELVAR holds them as if pixels were independent,
// and so do the errors of single voxels, nearly.
func TestThroughputIsShared(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8)
	shape, err := ParseVoxels("8-14", "5-9")
	require.NoError(t, err)
	a, err := c.aperture(t.Context(), SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	a.plain()
	channels := c.Grid.Count
	sums := table[float64](1, channels)
	for l := 2; l < channels-2; l++ {
		sums[0][l] = 1
	}
	quiet, err := c.propagate(t.Context(), a, sums)
	require.NoError(t, err)
	const e = 0.02
	for k := range c.noise.ThroughputErr {
		c.noise.ThroughputErr[k] = e
	}
	shaky, err := c.propagate(t.Context(), a, sums)
	require.NoError(t, err)
	// The direct way: each step off by e moves the light of all pixels; the variance of
	// the sum is made of those moves, and what the pixels held of them goes.
	moves := make([]float64, c.noise.V)
	inPixels := 0.0
	p := c.newPropagator(a)
	p.light, p.sums = c.newLightReader(nil), sums
	p.rowAt = rowStarts(a)
	code := c.decoder.Code()
	open, closed := code.InverseEntries()
	w := p.newPart(0)
	w.throughput, w.perChannel = nil, nil
	for y := range c.Rows {
		traces, err := p.tracesOf(y)
		require.NoError(t, err)
		if len(traces) == 0 {
			continue
		}
		light, err := p.light.row(y)
		require.NoError(t, err)
		pixels, err := p.pixelsOf(y)
		require.NoError(t, err)
		if !p.gather(w, y, traces) {
			continue
		}
		c.samples(&w.b, light, pixels)
		for x := range w.n {
			for k := range code.V() {
				sample := 0.0
				for slot, j := range a.elements {
					lo, g := w.weights(slot, x)
					entry := closed
					if code.Bit(k, c.columns[j]) == 1 {
						entry = open
					}
					for i, v := range g {
						sample += entry * v * sums[0][lo+i]
					}
				}
				light := float64(w.b.predicted[k*w.n+x])
				moves[k] += sample * light
				mean := 0.0
				for i := range code.V() {
					shared := e * float64(w.b.predicted[i*w.n+x])
					mean += shared * shared / float64(code.V())
				}
				inPixels += sample * sample * mean
			}
		}
	}
	shared := 0.0
	for _, m := range moves {
		shared += e * e * m * m
	}
	require.InEpsilon(t, quiet.sums[0]-inPixels+shared, shaky.sums[0], 1e-3)
	require.Greater(t, shaky.sums[0], 1.3*quiet.sums[0])
	for l := 2; l < channels-2; l++ {
		require.False(t, math.IsNaN(shaky.channels[l][0]))
	}
}
