package hadamard

import (
	"math"
	"slices"
	"sort"

	"gonum.org/v1/gonum/mat"
)

// lightSums are what the pixels say of several kinds of light m = 0, 1, ..., each a
// vector l_m of v numbers a pixel, l_0 the readings themselves: sum[m][n] is the sum of
// l_m l_n'/s^2 and noise[m][n] what noise alone gives of it, for m <= n.
type lightSums struct {
	pixels     int
	sum, noise [][]*mat.Dense
}

func (g *Gram) lightSums() *lightSums {
	return &lightSums{
		pixels: g.Pixels,
		sum:    [][]*mat.Dense{{mat.DenseCopyOf(g.sum)}},
		noise:  [][]*mat.Dense{{mat.DenseCopyOf(g.NoiseCovariance())}},
	}
}

// normalEquations are d = -H e + noise of covariance V, the checks' summed equations for
// the unknowns e, those of each kind of light together: P (y + sum_m e_m * l_m) = 0 times
// l_m, summed over the pixels.
type normalEquations struct {
	size int // unknowns a kind of light
	h, v *mat.SymDense
	d    []float64
	// scale is the rms noise of an unknown's light in a pixel. H/scale/scale' holds
	// noise whose eigenvalues reach to edge.
	scale []float64
	edge  float64
}

// equations are H_mn = P * (sum_mn - noise_mn), d = H's columns of l_0 summed, and
// V_mn = (P N P) * sum_mn for light (and noise) times the noise of the checks, with the
// rest of noise times noise for l_0 alone: the other kinds are made of lit columns, whose
// noise hardly correlates with the checks'.
func (c *Checks) equations(s *lightSums) *normalEquations {
	v, kinds := c.code.v, len(s.sum)
	pixels := float64(s.pixels)
	eq := &normalEquations{
		size: v, h: mat.NewSymDense(kinds*v, nil), v: mat.NewSymDense(kinds*v, nil),
		d: make([]float64, kinds*v), scale: make([]float64, kinds*v),
	}
	n := make([]float64, v)
	for i := range n {
		n[i] = s.noise[0][0].At(i, i) / pixels
	}
	pnp := c.noiseOfChecks(n)
	for a := range kinds {
		for b := a; b < kinds; b++ {
			sum, noise := s.sum[a][b], s.noise[a][b]
			for i := range v {
				first := 0
				if a == b {
					first = i
				}
				for j := first; j < v; j++ {
					p := c.projector.At(i, j)
					eq.h.SetSym(a*v+i, b*v+j, p*(sum.At(i, j)-noise.At(i, j)))
					both := pnp.At(i, j) * sum.At(i, j)
					if a == 0 && b == 0 {
						both += pixels * p * p * n[i] * n[j]
					}
					if a == b && i == j {
						both *= 1 + 1e-9 // so that rounding leaves V positive
						eq.scale[a*v+i] = math.Sqrt(max(0, noise.At(i, i)) / pixels)
					}
					eq.v.SetSym(a*v+i, b*v+j, both)
				}
			}
		}
	}
	for i := range eq.d {
		for j := range v {
			eq.d[i] += eq.h.At(i, j)
		}
	}
	for i := range v {
		eq.edge = max(eq.edge, 2*math.Sqrt(pixels*c.projector.At(i, i)))
	}
	return eq
}

// noiseOfChecks is P diag(n) P.
func (c *Checks) noiseOfChecks(n []float64) *mat.SymDense {
	out := mat.NewSymDense(len(n), nil)
	if c.basis == nil {
		return out
	}
	var weighted, inner mat.Dense
	weighted.Apply(func(_, k int, x float64) float64 { return x * n[k] }, c.basis)
	inner.Mul(&weighted, c.basis.T())
	return congruent(c.basis.T(), symmetric(&inner))
}

// measured is H without what is no more than the noise of its own measurement: for each
// kind of light the directions whose eigenvalues, in units of that noise, lie below the
// edge of those of a noise matrix (twice the root of the squares of a row: Wigner 1958,
// Ann. Math. 67, 325; negative ones among them) are taken out. With a wide prior they
// would be answered with noise.
func (eq *normalEquations) measured() *mat.SymDense {
	n, v := len(eq.d), eq.size
	kinds := n / v
	unit := mat.NewDense(n, n, nil)
	scale := slices.Clone(eq.scale)
	for a := range kinds {
		if own := scale[a*v : a*v+v]; noiseless(own) {
			for i := range own {
				own[i] = 1
			}
		}
	}
	for i := range n {
		for j := range n {
			if s := scale[i] * scale[j]; s > 0 {
				unit.Set(i, j, eq.h.At(i, j)/s)
			}
		}
	}
	kept := make([]*mat.Dense, kinds) // projectors
	for a := range kinds {
		if noiseless(eq.scale[a*v : a*v+v]) { // its light is known: all of H is measured
			kept[a] = identity(v)
			continue
		}
		kept[a] = above(symmetric(mat.DenseCopyOf(unit.Slice(a*v, a*v+v, a*v, a*v+v))), eq.edge)
	}
	out := mat.NewSymDense(n, nil)
	for a := range kinds {
		for b := a; b < kinds; b++ {
			var block mat.Dense
			block.Product(kept[a], unit.Slice(a*v, a*v+v, b*v, b*v+v), kept[b])
			for i := range v {
				for j := range v {
					if a < b || i <= j {
						out.SetSym(a*v+i, b*v+j, block.At(i, j)*scale[a*v+i]*scale[b*v+j])
					}
				}
			}
		}
	}
	return out
}

// noiseless tells a kind of light without noise.
func noiseless(scale []float64) bool { return slices.Max(scale) == 0 }

// above is the projector on the eigenvectors of a symmetric matrix whose eigenvalues
// exceed an edge.
func above(s *mat.SymDense, edge float64) *mat.Dense {
	n := s.SymmetricDim()
	out := mat.NewDense(n, n, nil)
	var eigen mat.EigenSym
	if !eigen.Factorize(s, true) {
		return out // nothing is measured
	}
	values := eigen.Values(nil)
	first := sort.Search(n, func(i int) bool { return values[i] > edge })
	if first == n {
		return out
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	kept := vectors.Slice(0, n, first, n)
	out.Mul(kept, kept.T())
	return out
}
