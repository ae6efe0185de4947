package calib

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// lampFrame is a lamp frame with all elements on, made without anything of the code
// under test: a trapezoid along x (a band convolved with the field), waves of 60 to
// 90 columns, a slit function, and a slit whose ends are an error function, followed
// along bent traces.
type lampFrame struct {
	width, height int
	shift         []float64
	light         []float64 // S
	truth         []float64 // P
	expected      []float32 // the trapezoid alone
	dead          int       // a column without response
}

const lampSlitFirst, lampSlitLast = 14.6, 105.2 // rows at x = X_c

func newLampFrame(level float64, seed uint64) *lampFrame {
	f := &lampFrame{width: 400, height: 120, dead: 211}
	rng := rand.New(rand.NewPCG(seed, 2))
	f.shift = make([]float64, f.width)
	for x := range f.shift {
		d := float64(x) - 199.5
		f.shift[x] = 0.0075*d + 6e-6*d*d
	}
	f.light, f.truth = make([]float64, f.width*f.height), make([]float64, f.width*f.height)
	f.expected = make([]float32, f.width*f.height)
	edge := func(u float64) float64 { return (1 + math.Erf(u*1.1774*2/3.2/math.Sqrt2)) / 2 }
	for y := range f.height {
		for x := range f.width {
			s := float64(x)
			trapezoid := min(1, max(0, (s-5)/120), max(0, (395-s)/120))
			band := trapezoid * (1 + 0.006*math.Sin(2*math.Pi*s/60+float64(y)/40) + 0.004*math.Sin(2*math.Pi*s/90))
			slit := 0.0
			for k := range 8 { // the pixel's height
				u := float64(y) - f.shift[x] + (float64(k)+0.5)/8 - 0.5
				slit += edge(u-lampSlitFirst) * edge(lampSlitLast-u) * (1 + 0.02*math.Sin(u/17)) / 8
			}
			i := y*f.width + x
			f.expected[i] = float32(trapezoid)
			f.light[i] = level * band * slit
			f.truth[i] = 1 + 0.01*rng.NormFloat64()
			if rng.Float64() < 0.002 {
				f.truth[i] = 0.7 // dust
			}
			if x == f.dead {
				f.truth[i] = 0
			}
		}
	}
	return f
}

// expose adds photon noise and a little read noise.
func (f *lampFrame) expose(rng *rand.Rand) (light, variance []float32, flags []Flag) {
	light, variance = make([]float32, len(f.light)), make([]float32, len(f.light))
	flags = make([]Flag, len(f.light))
	for i, s := range f.light {
		mean := s * f.truth[i]
		light[i] = float32(mean + math.Sqrt(mean+25)*rng.NormFloat64())
		variance[i] = max(light[i], 0) + 25
		if i%f.width == f.dead {
			flags[i] = BadPixel
		}
	}
	return light, variance, flags
}

// inside tells pixels well within slit and band.
func (f *lampFrame) inside(i int) bool {
	x, y := i%f.width, float64(i/f.width)-f.shift[i%f.width]
	return x > 150 && x < 250 && y > lampSlitFirst+8 && y < lampSlitLast-8
}

// The response of pixels that the lamp fills with 1 to 3 million electrons is found
// with an error as stated: noise of A, and what the smooth light takes of the pixels'
// own pattern (measured below, a tenth of it). Outliers are found whole, slit ends
// and dead columns do no harm, and the local mean is 1.
func TestPixelResponse(t *testing.T) {
	f := newLampFrame(2e6, 1)
	light, variance, flags := f.expose(rand.New(rand.NewPCG(3, 4)))
	p, err := DefaultPixelRule().Measure(context.Background(), light, variance, flags, f.expected, f.shift)
	require.NoError(t, err)
	require.InDelta(t, 0.01, p.Scatter, 0.0004)

	type group struct{ n, miss2, stated, dust, light2 float64 }
	var inner, ends, faint group
	for i, v := range p.Factor {
		x, y := i%f.width, float64(i/f.width)-f.shift[i%f.width]
		if x == f.dead || p.Flags[i] != 0 {
			continue
		}
		g := &inner
		switch {
		case f.inside(i):
		case x > 150 && x < 250 && f.light[i] > 0.02*2e6:
			g = &ends
		case y > lampSlitFirst+8 && y < lampSlitLast-8 && f.light[i] < 0.2*2e6 && f.light[i] > 2e3:
			g = &faint
		default:
			continue
		}
		miss := float64(v) - f.truth[i]
		if f.truth[i] == 0.7 {
			g.dust = max(g.dust, math.Abs(miss))
			continue
		}
		g.n++
		g.miss2 += miss * miss
		g.stated += float64(p.Variance[i])
		s := float64(light[i])/f.light[i] - f.truth[i]
		g.light2 += s * s
	}
	for name, g := range map[string]*group{"inner": &inner, "ends": &ends, "faint": &faint} {
		t.Logf("%s: %.0f pixels, rms error %.5f, stated %.5f, photons alone %.5f, worst dust %.4f", name, g.n, math.Sqrt(g.miss2/g.n), math.Sqrt(g.stated/g.n), math.Sqrt(g.light2/g.n), g.dust)
	}
	// Photons: 1/sqrt(2e6) = 0.0007; the light's own error adds about as much.
	require.Less(t, math.Sqrt(inner.miss2/inner.n), 0.0012)
	require.Less(t, math.Sqrt(ends.miss2/ends.n), 0.004)
	require.Less(t, inner.dust, 0.006)
	// Faint: never worse than the scatter it could have been set to.
	require.Less(t, math.Sqrt(faint.miss2/faint.n), 0.01)

	// The mean over 60 columns of a row is 1.
	for y := 30; y < 90; y += 7 {
		sum := 0.0
		for x := 120; x < 180; x++ {
			sum += float64(p.Factor[y*f.width+x]) / 60
		}
		require.InDelta(t, 1, sum, 0.004, "row %d (dust and the pattern's mean over 60 columns, 0.0013, included)", y)
	}
}

// Where the lamp gives no light nothing can be told, and where it gives some, the
// column without response is left to the bad pixels.
func TestPixelResponseFlags(t *testing.T) {
	f := newLampFrame(2e6, 5)
	light, variance, flags := f.expose(rand.New(rand.NewPCG(3, 4)))
	p, err := DefaultPixelRule().Measure(context.Background(), light, variance, flags, f.expected, f.shift)
	require.NoError(t, err)
	low := 0
	for i, fl := range p.Flags {
		y := float64(i/f.width) - f.shift[i%f.width]
		switch x := i % f.width; {
		case y < lampSlitFirst-7 || y > lampSlitLast+7 || x < 4 || x > 396:
			require.Equal(t, LowFlat, fl, "pixel %d, %.1f", x, y)
			require.Equal(t, float32(1), p.Factor[i])
			low++
		case f.light[i] > 400:
			require.Zero(t, fl, "pixel %d, %.1f holds %g e", x, y, f.light[i])
			if x == f.dead {
				require.Equal(t, float32(1), p.Factor[i])
			}
		}
	}
	require.Positive(t, low)
	require.GreaterOrEqual(t, p.Low, low)
}

// The stated variance against the error over N detectors, exposed once each.
func TestPixelResponseVarianceMonteCarlo(t *testing.T) {
	rng := rand.New(rand.NewPCG(9, 4))
	const trials = 8
	for _, level := range []float64{1e5, 2e6} {
		square, stated, n := 0.0, 0.0, 0
		for trial := range uint64(trials) {
			f := newLampFrame(level, 7+trial)
			light, variance, flags := f.expose(rng)
			p, err := DefaultPixelRule().Measure(context.Background(), light, variance, flags, f.expected, f.shift)
			require.NoError(t, err)
			for i, v := range p.Factor {
				if f.inside(i) && f.truth[i] != 0.7 && i%f.width != f.dead {
					square += math.Pow(float64(v)-f.truth[i], 2)
					stated += float64(p.Variance[i])
					n++
				}
			}
		}
		t.Logf("%g e: squared error over N = %d pixels of %d detectors: %.3f of the stated variance", level, n, trials, square/stated)
		// 0.1: waves of 60 columns in the lamp light, of which a period of 40 takes a
		// twelfth, are not noise and not in the variance.
		require.InDelta(t, 1, square/stated, 0.12+5*math.Sqrt(2/float64(n)))
	}
}

func TestPixelResponseDivide(t *testing.T) {
	p := &PixelResponse{Width: 2, Factor: []float32{2, 0.5, 1, 4}, Variance: []float32{0, 0, 1, 0.25}, Flags: make([]Flag, 4)}
	values, variances := []float32{8, 8}, []float32{4, 16}
	p.Divide(values, variances, 2)
	require.Equal(t, []float32{8, 2}, values)
	require.Equal(t, []float32{4 + 64, 16.0/16 + 4*0.25/16}, variances)
	p.Divide(values, nil, 0)
	require.Equal(t, []float32{4, 4}, values)
	factor, _, _ := p.Row(1)
	require.Equal(t, []float32{1, 4}, factor)
}

func TestPixelResponseRefuses(t *testing.T) {
	ctx := context.Background()
	shift := make([]float64, 10)
	_, err := DefaultPixelRule().Measure(ctx, make([]float32, 95), make([]float32, 95), nil, nil, shift)
	require.ErrorContains(t, err, "whole rows of 10")
	_, err = DefaultPixelRule().Measure(ctx, make([]float32, 30), make([]float32, 30), nil, nil, shift)
	require.ErrorContains(t, err, "rows are fewer")
	// No light at all: everything is LowFlat, nothing divides.
	p, err := DefaultPixelRule().Measure(ctx, make([]float32, 200), make([]float32, 200), nil, nil, shift)
	require.NoError(t, err)
	require.Equal(t, 200, p.Low)
	cancelled, cancel := context.WithCancel(ctx)
	cancel()
	_, err = DefaultPixelRule().Measure(cancelled, make([]float32, 200), make([]float32, 200), nil, nil, shift)
	require.ErrorIs(t, err, context.Canceled)
}
