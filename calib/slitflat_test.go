package calib

import (
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

// codedFlat is a coded lamp flat on the cube's grid with all that it is made of.
type codedFlat struct {
	elements, rows, voxels int
	lamp                   []float64 // known
	colour                 []float64 // what the lamp really has besides
	lit                    []float32
	slit                   []float64 // [row][element]
	band                   []float64 // [element][voxel]
	level, noise           float64
}

// newCodedFlat: slit function 2 % rms and smooth, efficiency 1.5 % rms in waves of 60
// to 150 voxels, a lamp that is 8 % bluer at one end than known, and ends of the slit.
func newCodedFlat(seed uint64) *codedFlat {
	s := &codedFlat{elements: 41, rows: 60, voxels: 300, level: 800, noise: 37}
	rng := rand.New(rand.NewPCG(seed, 6))
	wave := func() func(a, b float64) float64 {
		var p [4][3]float64
		for k := range p {
			p[k] = [3]float64{4*rng.Float64() - 2, 0.4 + 0.6*rng.Float64(), rng.Float64()}
		}
		return func(a, b float64) float64 {
			sum := 0.0
			for _, q := range p {
				sum += math.Sin(2 * math.Pi * (q[0]*a + q[1]*b + q[2]))
			}
			return sum / math.Sqrt2
		}
	}
	slit, band := wave(), wave()
	for l := range s.voxels {
		u := float64(l)/float64(s.voxels-1) - 0.5
		s.lamp = append(s.lamp, 1+0.5*u-0.8*u*u)
		s.colour = append(s.colour, 1+0.08*u+0.05*u*u)
	}
	for y := range s.rows {
		share := min(1, max(0, (float64(y)-3.5)/3), max(0, (float64(s.rows)-4.5-float64(y))/3))
		for j := range s.elements {
			s.lit = append(s.lit, float32(share))
			s.slit = append(s.slit, 1+0.02*slit(float64(j)/41, 2*float64(y)/60))
		}
	}
	for j := range s.elements {
		for l := range s.voxels {
			s.band = append(s.band, 1+0.015*band(float64(j)/41, float64(l)/60))
		}
	}
	return s
}

// strip makes rows y0..y0+h-1; a voxel is missing with probability missing.
func (s *codedFlat) strip(rng *rand.Rand, y0, h int, missing float64) (signal, variance []float32, flags []Flag) {
	n := s.voxels * h * s.elements
	signal, variance, flags = make([]float32, n), make([]float32, n), make([]Flag, n)
	for l := range s.voxels {
		for row := range h {
			for j := range s.elements {
				i, y := (l*h+row)*s.elements+j, y0+row
				light := s.level * s.lamp[l] * s.colour[l] * float64(s.lit[y*s.elements+j]) * s.slit[y*s.elements+j] * s.band[j*s.voxels+l]
				signal[i] = float32(light + s.noise*rng.NormFloat64())
				variance[i] = float32(s.noise * s.noise)
				if rng.Float64() < missing {
					signal[i], variance[i], flags[i] = float32(math.NaN()), float32(math.NaN()), NoData
				}
			}
		}
	}
	return signal, variance, flags
}

func (s *codedFlat) fit(t testing.TB, rng *rand.Rand, passes, h int, missing float64) *Response {
	t.Helper()
	f, err := NewFlatFit(DefaultFlatRule(), s.elements, s.rows, s.voxels, s.lamp, s.lit)
	require.NoError(t, err)
	var r *Response
	seed := rng.Uint64()
	for range passes {
		again := rand.New(rand.NewPCG(seed, 1)) // every pass reads the same flat
		for y0 := 0; y0 < s.rows; y0 += h {
			signal, variance, flags := s.strip(again, y0, min(h, s.rows-y0), missing)
			f.AddStrip(y0, min(h, s.rows-y0), signal, variance, flags, 0, s.elements/2)
			f.AddStrip(y0, min(h, s.rows-y0), signal, variance, flags, s.elements/2, s.elements)
		}
		r, err = f.Solve()
		require.NoError(t, err)
	}
	return r
}

// truth is the response less what the mean and the common colour cannot tell: its
// mean over the fully lit field is 1, and so is the mean over elements and rows at
// each voxel but for what a parabola over the band leaves.
func (s *codedFlat) truth() []float64 {
	out := make([]float64, s.rows*s.elements*s.voxels)
	sum, n := 0.0, 0.0
	for y := range s.rows {
		for j := range s.elements {
			for l := range s.voxels {
				v := s.slit[y*s.elements+j] * s.band[j*s.voxels+l]
				out[(y*s.elements+j)*s.voxels+l] = v
				if s.lit[y*s.elements+j] >= 0.99 {
					sum += v
					n++
				}
			}
		}
	}
	for i := range out {
		out[i] *= n / sum
	}
	return out
}

type flatMiss struct{ n, mean, square, stated, factor float64 }

// compare the response with the truth in fully lit rows.
func (s *codedFlat) compare(r *Response, lit bool) flatMiss {
	var m flatMiss
	truth := s.truth()
	for y := range s.rows {
		for j := range s.elements {
			share := s.lit[y*s.elements+j]
			if lit != (share >= 0.99) || share < 0.1 {
				continue
			}
			for l := range s.voxels {
				factor, variance, flags := r.At(j, y, l)
				if flags != 0 {
					continue
				}
				miss := float64(factor) - truth[(y*s.elements+j)*s.voxels+l]
				m.n++
				m.mean += miss
				m.square += miss * miss
				m.stated += float64(variance)
				m.factor += float64(factor)
			}
		}
	}
	m.mean /= m.n
	m.square /= m.n
	m.stated /= m.n
	m.factor /= m.n
	return m
}

// One coded cycle of S/N 21 a voxel gives the response of every voxel to a few
// parts in 1000, as stated; the flux is conserved; what the variance gains is far
// below a tenth of a voxel's photon variance of S/N 60.
func TestFlatFit(t *testing.T) {
	s := newCodedFlat(3)
	r := s.fit(t, rand.New(rand.NewPCG(1, 2)), 2, 7, 0.01)
	m := s.compare(r, true)
	t.Logf("period %.0f, chi2 %.3f; %.0f voxels: rms error %.5f, stated %.5f, mean response %.7f", r.Period, r.Chi2, m.n, math.Sqrt(m.square), math.Sqrt(m.stated), m.factor)
	require.InDelta(t, 1, m.factor, 1e-6)
	require.Less(t, math.Sqrt(m.square), 0.006)
	require.Less(t, m.stated, 0.1/(60*60))
	require.InDelta(t, 1, r.Chi2, 0.1)
	for l, c := range r.Colour {
		// The mean efficiency of all elements is not quite 1 at each voxel, and its
		// parabola cannot be told from the lamp's colour.
		mean := 0.0
		for _, v := range s.colour {
			mean += v / float64(s.voxels)
		}
		require.InDelta(t, s.colour[l]/mean, c, 0.004, "voxel %d", l)
	}
	ends := s.compare(r, false)
	t.Logf("slit ends: %.0f voxels, rms error %.5f, stated %.5f", ends.n, math.Sqrt(ends.square), math.Sqrt(ends.stated))
	require.Less(t, math.Sqrt(ends.square), 0.012)
}

// The stated variance against the error over N = 12 flats, each of a field of its
// own. Common to all voxels of a wavelength is the parabola of the mean efficiency:
// it is no noise, so that the tolerance is wide.
func TestFlatFitVarianceMonteCarlo(t *testing.T) {
	const trials = 12
	rng := rand.New(rand.NewPCG(4, 4))
	var square, stated float64
	for trial := range uint64(trials) {
		s := newCodedFlat(20 + trial)
		m := s.compare(s.fit(t, rng, 1, s.rows, 0), true)
		square += m.square
		stated += m.stated
	}
	t.Logf("squared error / stated variance over %d flats: %.3f", trials, square/stated)
	require.InDelta(t, 1, square/stated, 0.3)
}

// A second pass takes out what voxels missing in some rows leave in the first, and
// how strips are cut changes nothing, bit for bit.
func TestFlatFitPassesAndStrips(t *testing.T) {
	s := newCodedFlat(5)
	s.noise = 0.01 // the fit alone
	worst := map[int]float64{}
	for _, passes := range []int{1, 2} {
		r := s.fit(t, rand.New(rand.NewPCG(7, 7)), passes, 1, 0.02)
		require.Equal(t, r, s.fit(t, rand.New(rand.NewPCG(7, 7)), passes, 1, 0.02))
		truth := s.truth()
		for y := range s.rows {
			for j := range s.elements {
				if s.lit[y*s.elements+j] < 0.99 {
					continue
				}
				// Along the slit alone: the colour's parabola does not enter.
				f, _, _ := r.At(j, y, 150)
				g, _, _ := r.At(j, s.rows/2, 150)
				at := (y*s.elements + j) * s.voxels
				mid := (s.rows/2*s.elements + j) * s.voxels
				want := truth[at+150] / truth[mid+150]
				worst[passes] = max(worst[passes], math.Abs(float64(f/g)/want-1))
			}
		}
	}
	t.Logf("worst error of s with 2 %% of the voxels missing: %.1e after one pass, %.1e after two", worst[1], worst[2])
	require.Less(t, worst[1], 2e-3)
	require.Less(t, worst[2], 2e-5)
}

func TestFlatFitRefusesAndFlags(t *testing.T) {
	rule := DefaultFlatRule()
	lamp := make([]float64, 50)
	_, err := NewFlatFit(rule, 2, 3, 49, lamp, nil)
	require.Error(t, err)
	_, err = NewFlatFit(rule, 2, 3, 50, lamp, make([]float32, 5))
	require.Error(t, err)
	_, err = NewFlatFit(rule, 2, 3, 2, lamp[:2], nil)
	require.ErrorContains(t, err, "colour_degree")
	lamp[3] = -1
	_, err = NewFlatFit(rule, 2, 3, 50, lamp, nil)
	require.ErrorContains(t, err, "voxel 3")

	// A lamp that stayed dark.
	s := newCodedFlat(1)
	s.level = 0
	f, err := NewFlatFit(rule, s.elements, s.rows, s.voxels, s.lamp, s.lit)
	require.NoError(t, err)
	_, err = f.Solve()
	require.ErrorIs(t, err, ErrNoLight)

	// An element of which nothing was seen, voxels without lamp, and a blocked piece
	// of the slit are LowFlat; the others are not.
	s = newCodedFlat(1)
	for l := range 20 {
		s.lamp[l] = 0
	}
	for y := range s.rows {
		for l := range s.voxels {
			s.band[7*s.voxels+l] = 0
		}
		if y >= 20 && y < 30 {
			s.slit[y*s.elements+11] = 0.01
		}
	}
	r := s.fit(t, rand.New(rand.NewPCG(2, 2)), 1, s.rows, 0)
	for l := range s.voxels {
		_, _, flags := r.At(7, 30, l)
		require.Equal(t, LowFlat, flags)
		_, _, flags = r.At(8, 30, l)
		require.Equal(t, l < 20, flags == LowFlat, "voxel %d", l)
	}
	for y := 21; y < 29; y++ {
		_, _, flags := r.At(11, y, 100)
		require.Equal(t, LowFlat, flags, "row %d", y)
	}
	_, _, flags := r.At(11, 45, 100)
	require.Zero(t, flags)
}

func TestResponseDivide(t *testing.T) {
	r := &Response{
		Elements: 2, Rows: 1, Voxels: 3,
		Slit: []float32{9, 2}, SlitVariance: []float32{0, 0.25}, SlitFlags: []Flag{0, 0},
		Band: []float32{9, 9, 9, 0.5, 1, 2}, BandVariance: []float32{0, 0, 0, 0, 0.25, 0.5}, BandFlags: []Flag{0, 0, 0, 0, 0, LowFlat},
	}
	nan := float32(math.NaN())
	signal, variance, flags := []float32{4, nan, 8}, []float32{1, nan, 16}, []Flag{0, NoData, BadPixel}
	r.Divide(signal, variance, flags, 1, 0)
	require.Equal(t, []float32{4, 2}, []float32{signal[0], signal[2]})
	require.Equal(t, []float32{1 + 16*0.25, 1 + 4*0.75}, []float32{variance[0], variance[2]})
	require.True(t, math.IsNaN(float64(signal[1])) && math.IsNaN(float64(variance[1])))
	require.Equal(t, []Flag{0, NoData, BadPixel | LowFlat}, flags)
	factor, v, _ := r.At(1, 0, 1)
	require.Equal(t, []float32{2, 4 * 0.5}, []float32{factor, v})
}

// BenchmarkResponseDivide: bytes are signal, variance and flags, in and out.
func BenchmarkResponseDivide(b *testing.B) {
	const n = 400
	r := &Response{Elements: 1, Rows: 1, Voxels: n, Slit: []float32{1}, SlitVariance: []float32{0}, SlitFlags: []Flag{0},
		Band: make([]float32, n), BandVariance: make([]float32, n), BandFlags: make([]Flag, n)}
	for i := range r.Band {
		r.Band[i] = 1
	}
	signal, variance, flags := make([]float32, n), make([]float32, n), make([]Flag, n)
	b.SetBytes(n * 10 * 2)
	for b.Loop() {
		r.Divide(signal, variance, flags, 0, 0)
	}
}
