package hadamard

import (
	"fmt"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/mat"
)

// Chi2Permuted is the chi-square less its expectation under noise, for the pairing that
// gives row i the readings of row from[i]. Nothing is allocated.
func (c *Checks) Chi2Permuted(g *Gram, from []int) float64 {
	v := c.code.v
	if len(from) != v || g.V() != v {
		panic(fmt.Sprintf("internal error: hadamard: a pairing of %d rows and a Gram of %d for a code of %d", len(from), g.V(), v))
	}
	p, s := c.projector.RawSymmetric(), g.sum.RawSymmetric()
	sum := 0.0
	for i, a := range from {
		row, own, above := p.Data[i*p.Stride:i*p.Stride+v], 0.0, 0.0
		for j := i + 1; j < v; j++ {
			low, high := min(a, from[j]), max(a, from[j])
			above += float64(row[j] * s.Data[low*s.Stride+high])
		}
		own = row[i] * s.Data[a*s.Stride+a]
		sum += own + 2*above - c.permutedNoise(g, from, i)
	}
	return sum
}

// permutedNoise is row i's part of the expectation.
func (c *Checks) permutedNoise(g *Gram, from []int, i int) float64 {
	sum := 0.0
	if g.covariance == nil {
		for j, a := range from {
			if a == from[i] {
				sum += c.projector.At(i, j) * g.noise[a]
			}
		}
		return sum
	}
	for j, a := range from {
		sum += c.projector.At(i, j) * g.covariance.At(from[i], a)
	}
	return sum
}

// Rotations are the values of Chi2Permuted for all v rotations of one order against
// another: entry s is that of the pairing which gives row rows[(t+s) mod v] the readings
// of row frames[t], for every t. With the rows in order of time for both, entry s is the
// night whose frames are s steps late; with frames reversed, the reversed nights. Both
// are permutations of 0..v-1.
//
// Along each wrapped diagonal the sum is a circular correlation, so that all v cost
// v transforms of length 4v or less: a second at v = 1023.
func (c *Checks) Rotations(g *Gram, frames, rows []int) []float64 {
	v := c.code.v
	if len(frames) != v || len(rows) != v || g.V() != v {
		panic(fmt.Sprintf("internal error: hadamard: orders of %d frames and %d rows, a Gram of %d, a code of %d", len(frames), len(rows), g.V(), v))
	}
	size := 1
	for size < 2*v {
		size *= 2
	}
	light := g.light() // the noise goes with the frames
	fft := fourier.NewFFT(size)
	sum := make([]complex128, size/2+1)
	x, y := make([]float64, size), make([]float64, size)
	var a, b []complex128
	for d := 0; 2*d <= v; d++ {
		weight := 2.0 // diagonals d and v-d hold the same pairs
		if d == 0 || 2*d == v {
			weight = 1
		}
		for t := range v {
			u := (t + d) % v
			y[t] = weight * light.At(frames[t], frames[u])
			x[t] = c.projector.At(rows[t], rows[u])
			x[t+v] = x[t]
		}
		a, b = fft.Coefficients(a, x), fft.Coefficients(b, y)
		for i := range sum {
			sum[i] += a[i] * complex(real(b[i]), -imag(b[i]))
		}
	}
	out := fft.Sequence(nil, sum)[:v]
	for s := range out {
		out[s] /= float64(size)
	}
	return out
}

// Exchanges gives, for every pair of rows i and j, by how much Chi2Permuted changes when
// their readings are exchanged: negative where the exchange is an improvement. The
// diagonal is 0. Only for a Gram that is not Mapped.
func (c *Checks) Exchanges(g *Gram) *mat.SymDense {
	v := c.code.v
	light := g.light()
	var t mat.Dense // P L: sums over all rows, from which i and j themselves are taken
	t.Mul(mat.DenseCopyOf(c.projector), mat.DenseCopyOf(light))
	out := mat.NewSymDense(v, nil)
	for i := range v {
		pii, lii := c.projector.At(i, i), light.At(i, i)
		for j := i + 1; j < v; j++ {
			pij, pjj := c.projector.At(i, j), c.projector.At(j, j)
			lij, ljj := light.At(i, j), light.At(j, j)
			all := t.At(i, j) - t.At(i, i) - t.At(j, j) + t.At(j, i)
			all -= (pii-pij)*(lij-lii) + (pij-pjj)*(ljj-lij)
			out.SetSym(i, j, 2*all+(pii-pjj)*(ljj-lii))
		}
	}
	return out
}
