package hadamard

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// Gram is all that is kept of the sampled pixels p to judge frames by:
//
//	G = sum_p y_p y_p'/s_p^2,
//
// y_p the v readings of a pixel and s_p^2 the mean of their variances, with the
// covariance of the noise in G's units, sum_p diag(s2_kp)/s_p^2. Sums over G answer
// every question of chi-square, pairing and throughput without the data.
//
// A pixel struck by a cosmic ray weighs in like all others: leave such pixels out.
type Gram struct {
	// Pixels is the number of pixels in the sums.
	Pixels int
	// Skipped is the number of pixels left out because a sample or the variance was
	// not finite, or the variance not above zero.
	Skipped int

	sum   *mat.SymDense // upper triangle
	noise []float64
	// covariance replaces diag(noise) once rows have been mixed; nil before.
	covariance *mat.SymDense
}

// gramPixels is how many pixels are added together: 512 rows of them in float64 are
// 512 KiB, which a second-level cache holds.
const gramPixels = 128

// NewGram makes an empty Gram of v rows.
func NewGram(v int) *Gram {
	return &Gram{sum: mat.NewSymDense(v, nil), noise: make([]float64, v)}
}

// V is the number of rows.
func (g *Gram) V() int { return len(g.noise) }

// Add adds pixels: y their readings and s2 the readings' variances, both as
// [code row][pixel], row i at [i*stride : i*stride+pixels]. s2 may be unclipped and
// noisy, negative too: only its mean over the rows is used in the weight, raised to
// floor. The weight's noise is then of the order of 1/v and its correlation with the
// readings negligible.
//
// The same calls in the same order give the same bits.
func (g *Gram) Add(y, s2 []float32, pixels, stride int, floor float32) {
	v := g.V()
	if need := (v-1)*stride + pixels; pixels < 0 || stride < pixels || len(y) < need || len(s2) < need {
		panic(fmt.Sprintf("internal error: hadamard: Gram.Add of %d rows of %d pixels at stride %d needs %d samples, has %d and %d variances",
			v, pixels, stride, need, len(y), len(s2)))
	}
	buffer := make([]float64, v*min(pixels, gramPixels))
	for p := 0; p < pixels; p += gramPixels {
		n := min(gramPixels, pixels-p)
		g.addBlock(buffer, y[p:], s2[p:], pixelWeights(v, y[p:], s2[p:], n, stride, floor), stride)
	}
}

// AddExpected adds what pixels will give in the mean before they are read: light and
// variances as Add's y and s2, both known, [code row][pixel] without gaps, where pixel p
// stands for counts[p] of the same light. With w = count/s^2, s^2 the mean of a pixel's
// variances, sum_p w (y y' + diag(s2)) goes to G and w s2 to its noise: the expected value
// of Add on so many drawn pixels. Pixels of no variance are skipped.
func (g *Gram) AddExpected(light, variances []float64, counts []int) {
	v, pixels := g.V(), len(counts)
	if need := v * pixels; len(light) != need || len(variances) != need {
		panic(fmt.Sprintf("internal error: hadamard: Gram.AddExpected of %d rows of %d pixels needs %d samples, has %d and %d variances", v, pixels, need, len(light), len(variances)))
	}
	weights := make([]float64, pixels)
	for p, count := range counts {
		mean := 0.0
		for i := range v {
			mean += variances[i*pixels+p] / float64(v)
		}
		if mean > 0 {
			weights[p] = float64(count) / mean
			g.Pixels += count
		} else {
			g.Skipped += count
		}
	}
	scaled := make([]float64, len(light))
	for i := range v {
		noise := 0.0
		for p, w := range weights {
			scaled[i*pixels+p] = light[i*pixels+p] * math.Sqrt(w)
			noise += variances[i*pixels+p] * w
		}
		g.noise[i] += noise
		g.sum.SetSym(i, i, g.sum.At(i, i)+noise)
	}
	addOuter(g.sum, scaled, pixels)
}

// addBlock adds pixels of given weights; buffer is left with the readings times the roots
// of the weights.
func (g *Gram) addBlock(buffer []float64, y, s2 []float32, weights []float64, stride int) {
	v, pixels := g.V(), len(weights)
	for i := range v {
		row, variances := y[i*stride:i*stride+pixels], s2[i*stride:i*stride+pixels]
		out := buffer[i*pixels : (i+1)*pixels]
		for p, w := range weights {
			out[p] = 0
			if w > 0 {
				out[p] = float64(row[p]) * math.Sqrt(w)
				g.noise[i] += float64(float64(variances[p]) * w)
			}
		}
	}
	for _, w := range weights {
		if w > 0 {
			g.Pixels++
		} else {
			g.Skipped++
		}
	}
	addOuter(g.sum, buffer[:v*pixels], pixels)
}

// addOuter adds x x' to sum, x of as many rows, each of pixels.
func addOuter(sum *mat.SymDense, x []float64, pixels int) {
	v := sum.SymmetricDim()
	blas64.Syrk(blas.NoTrans, 1, blas64.General{Rows: v, Cols: pixels, Stride: pixels, Data: x}, 1, sum.RawSymmetric())
}

// pixelWeights are 1/max(mean of s2, floor), 0 for a pixel to be left out.
func pixelWeights(v int, y, s2 []float32, pixels, stride int, floor float32) []float64 {
	weights := make([]float64, pixels)
	finite := make([]float64, pixels)
	for i := range v {
		for p, x := range s2[i*stride : i*stride+pixels] {
			weights[p] += float64(x)
		}
		for p, x := range y[i*stride : i*stride+pixels] {
			finite[p] += float64(x - x) // NaN once a sample is not finite
		}
	}
	for p, sum := range weights {
		mean := max(sum/float64(v), float64(floor))
		weights[p] = 0
		if mean > 0 && !math.IsInf(mean, 0) && !math.IsNaN(sum) && finite[p] == 0 {
			weights[p] = 1 / mean
		}
	}
	return weights
}

// Merge adds what other holds. Floating-point sums depend on their order: for the
// same bits whatever the workers, merge in an order of your own, by detector row.
func (g *Gram) Merge(other *Gram) {
	g.Pixels += other.Pixels
	g.Skipped += other.Skipped
	if g.covariance != nil || other.covariance != nil {
		sum := g.NoiseCovariance()
		sum.AddSym(sum, other.NoiseCovariance())
		g.covariance = sum
	}
	g.sum.AddSym(g.sum, other.sum)
	for i, n := range other.noise {
		g.noise[i] += n
	}
}

// Sum is G, a copy.
func (g *Gram) Sum() *mat.SymDense {
	s := mat.NewSymDense(g.V(), nil)
	s.CopySym(g.sum)
	return s
}

// Noise is the variance that noise gives each row in G, sum_p s2_kp/s_p^2: on average
// over the rows the number of pixels. A copy.
func (g *Gram) Noise() []float64 { return append([]float64(nil), g.noise...) }

// NoiseCovariance is diag(Noise), or the full covariance after Mapped. A copy.
func (g *Gram) NoiseCovariance() *mat.SymDense {
	n := mat.NewSymDense(g.V(), nil)
	if g.covariance != nil {
		n.CopySym(g.covariance)
		return n
	}
	for i, x := range g.noise {
		n.SetSym(i, i, x)
	}
	return n
}

// light is G less its noise: an unbiased estimate of the noiseless G.
func (g *Gram) light() *mat.SymDense {
	s := g.Sum()
	if g.covariance != nil {
		for i := range g.V() {
			for j := i; j < g.V(); j++ {
				s.SetSym(i, j, s.At(i, j)-g.covariance.At(i, j))
			}
		}
		return s
	}
	for i, n := range g.noise {
		s.SetSym(i, i, s.At(i, i)-n)
	}
	return s
}

// Scaled is the Gram of readings whose row k is factor[k] times as large, the noise
// with it.
func (g *Gram) Scaled(factor []float64) *Gram {
	v := g.V()
	if len(factor) != v {
		panic(fmt.Sprintf("internal error: hadamard: %d factors for a Gram of %d rows", len(factor), v))
	}
	out := NewGram(v)
	out.Pixels, out.Skipped = g.Pixels, g.Skipped
	scale := func(to, from *mat.SymDense) {
		for i := range v {
			for j := i; j < v; j++ {
				to.SetSym(i, j, factor[i]*from.At(i, j)*factor[j])
			}
		}
	}
	scale(out.sum, g.sum)
	for i, n := range g.noise {
		out.noise[i] = factor[i] * factor[i] * n
	}
	if g.covariance != nil {
		out.covariance = mat.NewSymDense(v, nil)
		scale(out.covariance, g.covariance)
	}
	return out
}

// Permuted is the Gram of readings of which row i is what row from[i] is here. An
// index may come more than once (a frame used for two rows); the noise of the two is
// then one. Indices are in 0..v-1.
func (g *Gram) Permuted(from []int) *Gram {
	v := g.V()
	if len(from) != v {
		panic(fmt.Sprintf("internal error: hadamard: a pairing of %d rows for a Gram of %d", len(from), v))
	}
	out := NewGram(v)
	out.Pixels, out.Skipped = g.Pixels, g.Skipped
	used, twice := make([]bool, v), false
	for i, a := range from {
		twice = twice || used[a]
		used[a] = true
		out.noise[i] = g.noise[a]
		for j := i; j < v; j++ {
			out.sum.SetSym(i, j, g.sum.At(a, from[j]))
		}
	}
	if twice || g.covariance != nil {
		full := g.NoiseCovariance()
		out.covariance = mat.NewSymDense(v, nil)
		for i, a := range from {
			for j := i; j < v; j++ {
				out.covariance.SetSym(i, j, full.At(a, from[j]))
			}
		}
	}
	return out
}

// Mapped is the Gram of the readings m y (m is v x v): M G M', and the noise's full
// covariance likewise.
func (g *Gram) Mapped(m *mat.Dense) *Gram {
	v := g.V()
	out := NewGram(v)
	out.Pixels, out.Skipped = g.Pixels, g.Skipped
	out.sum = congruent(m, g.sum)
	out.covariance = congruent(m, g.NoiseCovariance())
	for i := range out.noise {
		out.noise[i] = out.covariance.At(i, i)
	}
	return out
}

// congruent is m s m'.
func congruent(m mat.Matrix, s *mat.SymDense) *mat.SymDense {
	var half, full mat.Dense
	half.Mul(m, mat.DenseCopyOf(s)) // with a SymDense it is ten times as slow
	full.Mul(&half, m.T())
	return symmetric(&full)
}

// symmetric is the symmetric part of a square matrix.
func symmetric(m *mat.Dense) *mat.SymDense {
	n, _ := m.Dims()
	s := mat.NewSymDense(n, nil)
	for i := range n {
		for j := i; j < n; j++ {
			s.SetSym(i, j, (m.At(i, j)+m.At(j, i))/2)
		}
	}
	return s
}
