package hadamard

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// TermGram is a Gram that can also tell by how much each frame changed only part of the
// light: a slope over wavelength, as extinction leaves, or sky lines apart from the
// continuum. A term m is a weight w_j(p) of every column in every pixel; its light is
//
//	l_m = W (w_m * f),
//
// f = Ay the pixel's decode and the weights of dark columns 0, and a frame k in which that
// part is 1/(1+e) times what it should be lacks e l_mk. TermGram keeps sum_p l_m l_n'/s^2
// with the readings themselves as l_0, and what noise of equal rows gives of it.
type TermGram struct {
	*Gram
	decoder *Decoder
	lit     []int
	known   []bool // by term, 0 being the readings
	// light[m][n] for m <= n, the term 0 being the readings; [0][0] stays empty.
	light [][]*mat.Dense
	// weights[m][n] is sum_p w_m w_n' for 1 <= m <= n, and first[m] sum_p w_m.
	weights [][]*mat.Dense
	first   [][]float64
}

// NewTermGram makes an empty one for a number of terms, at least one. The dark columns
// are those of c.
func NewTermGram(c *Checks, d *Decoder, terms int) (*TermGram, error) {
	if d.code != c.code && (d.code.v != c.code.v || d.code.family != c.code.family) {
		return nil, fmt.Errorf("terms: the decoder is of a %s code of %d, the checks of a %s code of %d", d.code.family, d.code.v, c.code.family, c.code.v)
	}
	if terms < 1 {
		return nil, fmt.Errorf("terms: %d of them; without a term use a Gram", terms)
	}
	t := &TermGram{Gram: NewGram(c.code.v), decoder: d, first: make([][]float64, terms+1), known: make([]bool, terms+1)}
	for j, dark := range c.isDark() {
		if !dark {
			t.lit = append(t.lit, j)
		}
	}
	for m := range terms + 1 {
		t.light = append(t.light, make([]*mat.Dense, terms+1))
		t.weights = append(t.weights, make([]*mat.Dense, terms+1))
		t.first[m] = make([]float64, c.code.v)
		for n := max(m, 1); n <= terms; n++ {
			t.light[m][n] = mat.NewDense(c.code.v, c.code.v, nil)
			if m > 0 {
				t.weights[m][n] = mat.NewDense(c.code.v, c.code.v, nil)
			}
		}
	}
	return t, nil
}

// Know makes term m, from 1 on, one whose light is known beforehand, as that of sky lines
// whose spectrum is: weights are then not multiplied by the pixel's decode but are the light
// of the columns itself, and without noise. Call it before Add, and for what is merged too.
func (t *TermGram) Know(m int) { t.known[m] = true }

// Terms is the number of terms.
func (t *TermGram) Terms() int { return len(t.light) - 1 }

// Add adds pixels as Gram.Add does; weights holds one block a term, [code column][pixel]
// with the stride of the others. A weight of the order of 1 where the term acts keeps
// e of the order of the throughput's.
//
// light are the readings whose decode the terms' light is made of: y itself at first. It
// holds the faults that are looked for, so that e is right to first order; TermsFit.Correct
// of an earlier fit makes it better (y stays what it is).
func (t *TermGram) Add(y, light, s2 []float32, weights [][]float32, pixels, stride int, floor float32) {
	t.check("Add", weights, pixels, stride, len(y), len(light), len(s2))
	b := newTermBlock(t.V(), t.Terms())
	part := make([][]float32, len(weights))
	for p := 0; p < pixels; p += gramPixels {
		n := min(gramPixels, pixels-p)
		by := pixelWeights(t.V(), y[p:], s2[p:], n, stride, floor)
		for q, x := range pixelWeights(t.V(), light[p:], s2[p:], n, stride, floor) {
			by[q] = min(by[q], x) // 0 where the light is not finite
		}
		for m, w := range weights {
			part[m] = w[p:]
		}
		t.Gram.addBlock(b.light[0], y[p:], s2[p:], by, stride)
		t.addBlock(b, light[p:], part, by, stride)
	}
}

// check guards the callers' invariants on block sizes.
func (t *TermGram) check(name string, weights [][]float32, pixels, stride int, lengths ...int) {
	need := (t.V()-1)*stride + pixels
	for _, w := range weights {
		lengths = append(lengths, len(w))
	}
	if len(weights) != t.Terms() || pixels < 0 || stride < pixels || slices.Min(lengths) < need {
		panic(fmt.Sprintf("internal error: hadamard: TermGram.%s of %d rows of %d pixels at stride %d needs %d samples a block and %d blocks of weights",
			name, t.V(), pixels, stride, need, t.Terms()))
	}
}

// termBlock is the memory of one block of pixels: light of every kind and weights, scaled
// by the root of the pixel's weight (light) and bare.
type termBlock struct {
	clean, decoded, work, out []float32
	light, weights            [][]float64
}

func newTermBlock(v, terms int) *termBlock {
	size := v * gramPixels
	b := &termBlock{clean: make([]float32, size), decoded: make([]float32, size), work: make([]float32, size), out: make([]float32, size)}
	for range terms + 1 {
		b.light = append(b.light, make([]float64, size))
		b.weights = append(b.weights, make([]float64, size))
	}
	return b
}

// addBlock adds the sums of terms; b.light[0] holds the readings' part already.
func (t *TermGram) addBlock(b *termBlock, light []float32, weights [][]float32, by []float64, stride int) {
	v, pixels := t.V(), len(by)
	root := make([]float64, pixels)
	for p, w := range by {
		root[p] = math.Sqrt(w)
	}
	for i := range v {
		for p, w := range by {
			b.clean[i*pixels+p] = 0 // a pixel left out may hold anything
			if w > 0 {
				b.clean[i*pixels+p] = light[i*stride+p]
			}
		}
	}
	t.decoder.Decode(b.decoded, b.clean, pixels, pixels)
	for m, w := range weights {
		t.termLight(b, m+1, w, pixels, stride)
		scaled(b.light[m+1], b.out, root, v)
		bare := b.weights[m+1][:v*pixels]
		clear(bare)
		if t.known[m+1] {
			continue // no noise
		}
		for _, j := range t.lit {
			for p := range pixels {
				if by[p] > 0 {
					x := float64(w[j*stride+p])
					bare[j*pixels+p] = x
					t.first[m+1][j] += x
				}
			}
		}
	}
	for m := range t.light {
		for n := max(m, 1); n < len(t.light); n++ {
			addProduct(t.light[m][n], b.light[m], b.light[n], v, pixels)
			if m > 0 {
				addProduct(t.weights[m][n], b.weights[m], b.weights[n], v, pixels)
			}
		}
	}
}

// termLight sets b.out to the light of term m in pixels whose decode is b.decoded.
func (t *TermGram) termLight(b *termBlock, m int, weights []float32, pixels, stride int) {
	clear(b.work[:t.V()*pixels])
	for _, j := range t.lit {
		if t.known[m] {
			copy(b.work[j*pixels:(j+1)*pixels], weights[j*stride:])
			continue
		}
		for p, x := range weights[j*stride : j*stride+pixels] {
			b.work[j*pixels+p] = x * b.decoded[j*pixels+p]
		}
	}
	t.decoder.Predict(b.out, b.work, pixels, pixels)
}

func scaled(dst []float64, src []float32, by []float64, rows int) {
	for i := range rows {
		for p, s := range by {
			dst[i*len(by)+p] = float64(src[i*len(by)+p]) * s
		}
	}
}

// addProduct adds a b' to sum.
func addProduct(sum *mat.Dense, a, b []float64, rows, pixels int) {
	general := func(x []float64) blas64.General {
		return blas64.General{Rows: rows, Cols: pixels, Stride: pixels, Data: x}
	}
	blas64.Gemm(blas.NoTrans, blas.Trans, 1, general(a), general(b), 1, sum.RawMatrix())
}

// Merge adds what other, of as many terms, holds: see Gram.Merge.
func (t *TermGram) Merge(other *TermGram) {
	t.Gram.Merge(other.Gram)
	for m := range t.light {
		for j, x := range other.first[m] {
			t.first[m][j] += x
		}
		for n := max(m, 1); n < len(t.light); n++ {
			t.light[m][n].Add(t.light[m][n], other.light[m][n])
			if m > 0 {
				t.weights[m][n].Add(t.weights[m][n], other.weights[m][n])
			}
		}
	}
}

// sums are the light sums of some terms, in their order; term 0 is always the first.
//
// Readings of unit noise give l_m the noise W diag(w_m) A of the lit rows of A, and those
// have A A' = (I - (l/k^2) J)/(k-l).
func (t *TermGram) sums(terms []int) *lightSums {
	base := t.lightSums()
	size := len(terms)
	out := &lightSums{pixels: base.pixels, sum: make([][]*mat.Dense, size), noise: make([][]*mat.Dense, size)}
	for a, m := range terms {
		out.sum[a], out.noise[a] = make([]*mat.Dense, size), make([]*mat.Dense, size)
		for b := a; b < size; b++ {
			n := terms[b]
			switch {
			case n == 0:
				out.sum[a][b], out.noise[a][b] = base.sum[0][0], base.noise[0][0]
			case m == 0:
				out.sum[a][b], out.noise[a][b] = t.light[0][n], t.noiseWithReadings(n)
			default:
				out.sum[a][b], out.noise[a][b] = t.light[m][n], t.noiseOfTerms(m, n)
			}
		}
	}
	return out
}

// noiseWithReadings is N (W diag(sum_p w) A)' with N of the average pixel.
func (t *TermGram) noiseWithReadings(m int) *mat.Dense {
	code := t.decoder.code
	weighted, out := code.inverse(), new(mat.Dense)
	for j := range code.v {
		for k, row := 0, weighted.RawRowView(j); k < code.v; k++ {
			row[k] *= t.first[m][j] * t.noise[k] / float64(max(1, t.Pixels))
		}
	}
	out.Mul(weighted.T(), code.design().T())
	return out
}

func (t *TermGram) noiseOfTerms(m, n int) *mat.Dense {
	code := t.decoder.code
	k, l := float64(code.k), float64(code.l)
	inner := mat.NewDense(code.v, code.v, nil)
	inner.Apply(func(i, j int, x float64) float64 {
		if i == j {
			return x * (1 - l/(k*k)) / (k - l)
		}
		return -x * l / (k * k) / (k - l)
	}, t.weights[m][n])
	var out mat.Dense
	w := code.design()
	out.Product(w, inner, w.T())
	return &out
}

// design is W.
func (c *Code) design() *mat.Dense {
	w := mat.NewDense(c.v, c.v, nil)
	for i := range c.v {
		for j := range c.v {
			w.Set(i, j, float64(c.Bit(i, j)))
		}
	}
	return w
}

// corrected is the Gram of the readings y + sum_a e_a * l_a, with its noise.
func (s *lightSums) corrected(e [][]float64) *Gram {
	v := len(e[0])
	out := NewGram(v)
	out.Pixels = s.pixels
	add := func(to *mat.SymDense, from [][]*mat.Dense) {
		for a := range e {
			for b := a; b < len(e); b++ {
				x := func(i, j int) float64 { return factor(e, a, i) * from[a][b].At(i, j) * factor(e, b, j) }
				for i := range v {
					for j := i; j < v; j++ {
						sum := to.At(i, j) + x(i, j)
						if a != b {
							sum += x(j, i)
						}
						to.SetSym(i, j, sum)
					}
				}
			}
		}
	}
	add(out.sum, s.sum)
	out.covariance = mat.NewSymDense(v, nil)
	add(out.covariance, s.noise)
	for i := range out.noise {
		out.noise[i] = out.covariance.At(i, i)
	}
	return out
}

// factor is what multiplies the light of a kind: 1 + e for the readings, e for the rest.
func factor(e [][]float64, kind, row int) float64 {
	if kind == 0 {
		return 1 + e[0][row]
	}
	return e[kind][row]
}
