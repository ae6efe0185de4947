package extract

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// What calib does to a voxel when the sky is taken off and counts become flux is undone.
func TestBeforeOnSky(t *testing.T) {
	signal, variance := []float32{130, 90, 70, 300}, []float32{140, 100, 80, 310}
	flags := []calib.Flag{0, 0, calib.BadPixel, 0}
	sum := calib.NewSkySum([]bool{true, true, true, false}, []float64{1, 2, 1, 1}, 4, 1)
	sum.AddPlane(0, signal, variance, flags, calib.BadPixel)
	sky, err := sum.Spectrum(1.3, calib.DefaultSkyLineRule())
	require.NoError(t, err)
	flux := calib.FluxScale{Factor: []float64{0.02}, RelVariance: []float64{1e-3}}
	a := &aperture{cells: make([]cell, 4), signal: table[float32](4, 1), variance: table[float32](4, 1), flags: table[int16](4, 1), skyPart: []float64{1, 1, 1, 0.6}, skyShare: sky.Weight}
	after, afterVariance := append([]float32(nil), signal...), append([]float32(nil), variance...)
	sky.Subtract(0, after, afterVariance, flags, calib.BadPixel, []float32{1, 1, 1, 0.6})
	flux.Apply(0, after, afterVariance, flags)
	for i := range 4 {
		a.signal[i][0], a.variance[i][0], a.flags[i][0] = after[i], afterVariance[i], flags[i]
	}
	o := &onSky{sky: &product.SkyRecord{Value: sky.Value, Variance: sky.Variance, Weight: sky.TotalWeight}, flux: &product.FluxRecord{Factor: flux.Factor, RelVariance: flux.RelVariance}}
	for i := range 4 {
		light, own := o.before(a, i, 0)
		require.InEpsilon(t, float64(signal[i])*0.02, light, 1e-5)
		require.InEpsilon(t, float64(variance[i])*0.02*0.02, own, 1e-4)
	}
	var none *onSky
	light, own := none.before(a, 3, 0)
	require.Equal(t, []float64{float64(after[3]), float64(afterVariance[3])}, []float64{light, own})
}

// A sum over places that see the sky with the weights P has the sky's error P times, less
// what its own voxels have in it: a hand-made case without pixels in common.
func TestSharedOnSky(t *testing.T) {
	c := &Cube{Elements: 2, Rows: 1}
	c.Grid.Count = 3
	c.onSky = &onSky{flux: &product.FluxRecord{Factor: []float64{2, 2, 2}, RelVariance: []float64{1e-4, 4e-4, 1e-4}}}
	a := &aperture{cells: make([]cell, 2), signal: [][]float32{{10, 20, 30}, {1, 2, 3}}, weight: [][]float64{{1, 1, 0}, {1, 0, 0}}}
	p := &propagator{c: c, a: a, sums: [][]float64{{1, 1, 1}}}
	out := &covariances{channels: table[float64](3, Lags+1), sums: make([]float64, 1)}
	require.NoError(t, p.addOnSky(out))
	require.InEpsilon(t, math.Pow(11*0.01, 2), out.channels[0][0], 1e-12)
	require.InEpsilon(t, 11*0.01*20*0.02, out.channels[0][1], 1e-12)
	require.Zero(t, out.channels[2][0])
	require.InEpsilon(t, math.Pow(11*0.01+20*0.02, 2), out.sums[0], 1e-12)
}
