package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// edgeFrame is a frame for EdgeRule: light and read noise, without a bad pixel.
type edgeFrame struct {
	width, rows int
	pixels      []float32
	flags       []Flag
	noise       FrameNoise
}

func newEdgeFrame(width, rows int, readNoise float64) *edgeFrame {
	f := &edgeFrame{width: width, rows: rows, pixels: make([]float32, width*rows), flags: make([]Flag, width*rows)}
	f.noise = FrameNoise{Read: make([]float32, width*rows), Photon: 1}
	for i := range f.noise.Read {
		f.noise.Read[i] = float32(readNoise * readNoise)
	}
	return f
}

// light adds electrons(x, y) to every pixel.
func (f *edgeFrame) light(electrons func(x, y float64) float64) {
	for i := range f.pixels {
		f.pixels[i] += float32(electrons(float64(i%f.width), float64(i/f.width)))
	}
}

// observe replaces the expected light by a noisy one. Above 50 e the photons' noise
// is a Gaussian's.
func (f *edgeFrame) observe(r *rand.Rand) {
	for i, m := range f.pixels {
		f.pixels[i] = float32(photons(r, float64(m)) + math.Sqrt(float64(f.noise.Read[i]))*r.NormFloat64())
	}
}

func photons(r *rand.Rand, mean float64) float64 {
	if mean > 50 {
		return mean + math.Sqrt(mean)*r.NormFloat64()
	}
	n, p := -1.0, 1.0
	for limit := math.Exp(-mean); p > limit; n++ {
		p *= r.Float64()
	}
	return max(n, 0)
}

func (f *edgeFrame) find(t require.TestingT, rule EdgeRule) []Strike {
	list, err := rule.Find(f.pixels, f.width, f.noise, f.flags)
	require.NoError(t, err)
	return list
}

func gaussian(distance, fwhm float64) float64 {
	return math.Exp(-4 * math.Ln2 * distance * distance / (fwhm * fwhm))
}

// A lone pixel's Laplacian is its height: on a level of 75 e with a read noise of 5
// e, N = 10 e, and a height of 55 e is the limit of 5.5 sigmas; at the frame's edge
// twice that, in its corner four times. The rest is not struck, and the pixel's value
// is the level.
func TestLaplaceLonePixel(t *testing.T) {
	for at, limit := range map[[2]int]float32{{10, 8}: 55, {1, 14}: 55, {7, 0}: 110, {19, 4}: 110, {0, 0}: 220, {19, 15}: 220} {
		for _, height := range []float32{0.998 * limit, 1.002 * limit} {
			f := newEdgeFrame(20, 16, 5)
			f.light(func(float64, float64) float64 { return 75 })
			i := at[1]*20 + at[0]
			f.pixels[i] += height
			if height < limit {
				require.Empty(t, f.find(t, DefaultEdgeRule()), "%v", at)
			} else {
				require.Equal(t, []Strike{{i, 75}}, f.find(t, DefaultEdgeRule()), "%v", at)
			}
			require.Equal(t, 75+height, f.pixels[i], "the frame was changed")
		}
	}
}

// Slopes have no edge, however steep; photons count with their variance.
func TestLaplaceSlope(t *testing.T) {
	f := newEdgeFrame(40, 30, 3)
	f.light(func(x, y float64) float64 { return 500 * (40 - x + y) })
	require.Empty(t, f.find(t, DefaultEdgeRule()))

	f = newEdgeFrame(20, 16, 5)
	f.light(func(float64, float64) float64 { return 75 })
	f.pixels[170] += 60
	require.Len(t, f.find(t, DefaultEdgeRule()), 1)
	f.noise.Photon = 2 // N^2 = 25 + 150 = 13.2^2
	require.Empty(t, f.find(t, DefaultEdgeRule()))
}

// Flagged pixels and those without a value are neither found nor used; a hit beside a
// bad column is found as at the frame's edge.
func TestLaplaceFlagged(t *testing.T) {
	f := newEdgeFrame(20, 16, 5)
	f.light(func(float64, float64) float64 { return 75 })
	for y := range 16 {
		f.pixels[20*y+7], f.flags[20*y+7] = 1e6, BadPixel
		f.pixels[20*y+12] = float32(math.NaN())
	}
	f.pixels[33], f.flags[33] = 6e4, Saturated
	f.pixels[126] += 111
	f.pixels[193] += 111
	require.Equal(t, []Strike{{126, 75}, {193, 75}}, f.find(t, DefaultEdgeRule()))
}

// Where nothing around is known there is neither an edge nor a value.
func TestLaplaceNothingAround(t *testing.T) {
	f := newEdgeFrame(20, 16, 5)
	f.light(func(float64, float64) float64 { return 75 })
	for i := range f.flags {
		f.flags[i] = BadPixel
	}
	f.flags[170], f.pixels[170] = 0, 3000
	require.Empty(t, f.find(t, DefaultEdgeRule()))
	// Two pixels beside each other: the brighter one's Laplacian is 2925/4 as in a
	// corner, and both medians are halfway: N = 39.5, S = 18.5, S' = 9.3.
	f.flags[171] = 0
	rule := DefaultEdgeRule()
	rule.Contrast = 0
	require.Equal(t, []Strike{{170, 75}}, f.find(t, rule))
}

func TestLaplaceRefuses(t *testing.T) {
	f := newEdgeFrame(20, 16, 5)
	rule := DefaultEdgeRule()
	_, err := rule.Find(f.pixels, 19, f.noise, f.flags)
	require.ErrorContains(t, err, "whole rows")
	_, err = rule.Find(f.pixels, 20, FrameNoise{f.noise.Read[1:], 1}, f.flags)
	require.ErrorContains(t, err, "variances")
	_, err = EdgeRule{Sigmas: 5}.Find(f.pixels, 20, f.noise, f.flags)
	require.ErrorContains(t, err, "rule")
	f.noise.Read[3] = 0
	_, err = rule.Find(f.pixels, 20, f.noise, f.flags)
	require.ErrorContains(t, err, "pixel 3")
	list, err := rule.Find(nil, 20, FrameNoise{}, nil)
	require.NoError(t, err)
	require.Empty(t, list)
}

// Noise alone: 9e6 independent pixels each of read noise without light and of little
// light, whose photons are skewed. Figure: fewer than 3e-6 are struck;
// 5 standard errors are 2.9e-6.
func TestLaplaceFalseAlarms(t *testing.T) {
	for _, c := range []struct{ read, light float64 }{{10, 0}, {3, 20}} {
		n, hits := 0, 0
		r := rand.New(rand.NewPCG(41, uint64(c.light)))
		for n < 9e6 {
			f := newEdgeFrame(1000, 1000, c.read)
			f.light(func(float64, float64) float64 { return c.light })
			f.observe(r)
			n += len(f.pixels)
			hits += len(f.find(t, DefaultEdgeRule()))
		}
		t.Logf("read noise %v e, light %v e: %d of %d struck", c.read, c.light, hits, n)
		require.Less(t, float64(hits), 3e-6*float64(n)+5*math.Sqrt(3e-6*float64(n)))
	}
}

// sharp draws light of a FWHM of 3 pixels or more: a line along the slit, a star, or
// an end of the slit.
func sharp(t *rapid.T, f *edgeFrame, kind string) func(x, y float64) float64 {
	width, height := float64(f.width), float64(f.rows)
	fwhm := rapid.Float64Range(3, 6).Draw(t, "fwhm")
	longer := rapid.Float64Range(1, 3).Draw(t, "axis ratio")
	x0, y0 := rapid.Float64Range(-2, width+2).Draw(t, "x"), rapid.Float64Range(-2, height+2).Draw(t, "y")
	tilt := rapid.Float64Range(-0.3, 0.3).Draw(t, "tilt")
	switch kind {
	case "line":
		return func(x, y float64) float64 { return gaussian(x-x0-tilt*(y-y0), fwhm) }
	case "star":
		return func(x, y float64) float64 { return gaussian(x-x0, fwhm) * gaussian(y-y0, fwhm*longer) }
	}
	return func(x, y float64) float64 { return gaussianBelow(y+tilt*(x-x0), y0, fwhm) }
}

// S' of what the optics allow stays below 0.4 F/N, and at the frame's edge, where
// medians look to one side, below F/N; the default contrast is 2.
func TestLaplaceContrast(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := newEdgeFrame(32, 24, 1e-4)
		f.noise.Photon = 0
		f.light(sharp(t, f, rapid.SampledFrom([]string{"line", "star", "end"}).Draw(t, "kind")))
		rule := DefaultEdgeRule()
		rule.Contrast = 1
		require.Empty(t, f.find(t, rule))
		rule.Contrast, rule.Iterations = 0.4, 1
		for _, s := range f.find(t, rule) {
			x, y := s.Pixel%f.width, s.Pixel/f.width
			require.Less(t, min(x, y, f.width-1-x, f.rows-1-y), edgeReach+growReach, "%d, %d", x, y)
		}
		// The test's own test.
		f.pixels[12*32+16] += 3
		require.NotEmpty(t, f.find(t, rule))
	})
}

// Noisy lines and stars of any brightness, FWHM 3 to 5 pixels: 2.5e6 pixels, a seventh
// of them on a line or star. Figure: fewer than 1e-5 struck; 5 standard errors are
// 1e-5 of these pixels.
func TestLaplaceSparesLight(t *testing.T) {
	r := rand.New(rand.NewPCG(43, 5))
	n, hits := 0, 0
	for _, fwhm := range []float64{3, 5} {
		for _, peak := range []float64{30, 1e3, 3e4, 3e5} {
			for _, star := range []bool{false, true} {
				f := newEdgeFrame(400, 400, 3)
				x0, y0 := r.Float64(), r.Float64()
				f.light(func(x, y float64) float64 {
					light := peak * gaussian(math.Mod(x+x0+0.05*y, 20)-10, fwhm)
					if star {
						light *= gaussian(math.Mod(y+y0+0.05*x, 20)-10, fwhm)
					}
					return 50 + light
				})
				f.observe(r)
				n += len(f.pixels)
				hits += len(f.find(t, DefaultEdgeRule()))
			}
		}
	}
	t.Logf("%d of %d struck", hits, n)
	require.Less(t, float64(hits), 1e-5*float64(n)+5*math.Sqrt(1e-5*float64(n)))
}

// Tracks of 1 to 10 pixels in any direction, each pixel of 20 to 1000 sigmas, on a
// noisy frame: every pixel is found.
func TestLaplaceFindsTracks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := newEdgeFrame(48, 48, 4)
		sky := rapid.Float64Range(0, 1000).Draw(t, "sky")
		f.light(func(float64, float64) float64 { return sky })
		f.observe(rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1)))
		sin, cos := math.Sincos(rapid.Float64Range(0, 2*math.Pi).Draw(t, "angle"))
		scale := 1 / max(math.Abs(sin), math.Abs(cos))
		sigma := math.Sqrt(16 + sky)
		var track []int
		for k := range rapid.IntRange(1, 10).Draw(t, "length") {
			x, y := int(24.5+float64(k)*cos*scale), int(24.5+float64(k)*sin*scale)
			f.pixels[y*48+x] += float32(sigma * math.Exp(rapid.Float64Range(math.Log(20), math.Log(1000)).Draw(t, "log height")))
			track = append(track, y*48+x)
		}
		found := map[int]float32{}
		for _, s := range f.find(t, DefaultEdgeRule()) {
			found[s.Pixel] = s.Value
		}
		for _, i := range track {
			require.Contains(t, found, i)
			// A median of at least 10 pixels, for which 4 sigmas are beyond chance.
			require.InDelta(t, sky, found[i], 4*sigma)
		}
	})
}

// A block with margins has the hits of the whole frame, bit for bit; with rows fewer
// it may not.
func TestLaplaceMargin(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		f := newEdgeFrame(24, 120, 4)
		f.light(func(x, y float64) float64 { return 100 + 2000*gaussian(math.Hypot(x-12, y-60), 4) })
		r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 2))
		f.observe(r)
		for range rapid.IntRange(0, 900).Draw(t, "hits") {
			f.pixels[r.IntN(len(f.pixels))] += float32(50 * math.Exp(2*r.NormFloat64()))
		}
		for range rapid.IntRange(0, 100).Draw(t, "bad pixels") {
			f.flags[r.IntN(len(f.flags))] |= BadPixel
		}
		rule := DefaultEdgeRule()
		rule.Iterations = rapid.IntRange(1, 4).Draw(t, "iterations")
		y0 := rapid.IntRange(0, 119).Draw(t, "first")
		y1 := rapid.IntRange(y0+1, 120).Draw(t, "end")
		first, end := max(0, y0-rule.MarginRows())*24, min(120, y1+rule.MarginRows())*24
		part, err := rule.Find(f.pixels[first:end], 24, FrameNoise{f.noise.Read[first:end], 1}, f.flags[first:end])
		require.NoError(t, err)
		own := func(list []Strike, shift int) (kept [][2]uint32) {
			for _, s := range list {
				if y := (s.Pixel + shift) / 24; y >= y0 && y < y1 {
					kept = append(kept, [2]uint32{uint32(s.Pixel + shift), math.Float32bits(s.Value)})
				}
			}
			return kept
		}
		require.Equal(t, own(f.find(t, rule), 0), own(part, first))
	})
}

func BenchmarkLaplace(b *testing.B) {
	f := newEdgeFrame(1024, 256, 3)
	f.light(func(x, y float64) float64 { return 300 + 3000*gaussian(math.Mod(x, 40)-20, 3.2) })
	r := rand.New(rand.NewPCG(7, 7))
	f.observe(r)
	for range len(f.pixels) / 1000 {
		f.pixels[r.IntN(len(f.pixels))] += 1500
	}
	b.SetBytes(int64(4 * len(f.pixels)))
	for b.Loop() {
		f.find(b, DefaultEdgeRule())
	}
}
