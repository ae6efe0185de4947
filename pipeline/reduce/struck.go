package reduce

import (
	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/mat"
)

// struckRatio is how much of a pixel's chi-square a single frame may take, against
// the mean of its other checks: an F statistic of 1 and G-1 degrees of freedom, which
// noise exceeds in fewer than one pixel of a hundred. Such a pixel was struck by a
// cosmic ray in that frame, and would pass the charge off as throughput.
const struckRatio = 36

// struckChunk is how many pixels are looked at together: their readings in float64 stay in
// the cache.
const struckChunk = 128

// dropStruck puts NaN into the pixels of a block that a cosmic ray struck: y are
// readings and s2 their variances, both [code row][pixel] with the given stride, basis
// orthonormal checks.
func dropStruck(y, s2 []float32, pixels, stride int, basis *mat.Dense) (dropped int) {
	g, v := basis.Dims()
	if g < 3 {
		return 0
	}
	share := make([]float64, v) // P_kk
	for k := range share {
		column := basis.ColView(k)
		share[k] = mat.Dot(column, column)
	}
	u := basis.RawMatrix()
	x, r, z := make([]float64, v*struckChunk), make([]float64, g*struckChunk), make([]float64, v*struckChunk)
	variance, light := make([]float64, struckChunk), make([]float64, struckChunk)
	for p0 := 0; p0 < pixels; p0 += struckChunk {
		n := min(struckChunk, pixels-p0)
		clear(variance)
		clear(light)
		for k := range v {
			at := k*stride + p0
			for p := range n {
				x[k*n+p] = float64(y[at+p])
				variance[p] += float64(s2[at+p]) / float64(v)
				light[p] += float64(y[at+p]) / float64(v)
			}
		}
		general := func(data []float64, rows int) blas64.General {
			return blas64.General{Rows: rows, Cols: n, Stride: n, Data: data[:rows*n]}
		}
		blas64.Gemm(blas.NoTrans, blas.NoTrans, 1, u, general(x, v), 0, general(r, g))
		blas64.Gemm(blas.Trans, blas.NoTrans, 1, u, general(r, g), 0, general(z, v))
		for p := range n {
			if isStruck(r[p:], z[p:], share, n, g, variance[p], light[p]) {
				y[p0+p] = nan32
				dropped++
			}
		}
	}
	return dropped
}

// isStruck looks at a pixel of a mean variance and light: r are its checks, z their
// projection on each frame, both at every stride-th place.
func isStruck(r, z, share []float64, stride, g int, variance, light float64) bool {
	if !(variance > 0) { // or NaN
		return false
	}
	chi2 := 0.0
	for i := range g {
		chi2 += r[i*stride] * r[i*stride]
	}
	worst := 0.0
	for k, s := range share {
		if s > leastShare {
			worst = max(worst, z[k*stride]*z[k*stride]/s)
		}
	}
	rest := max(variance, (chi2-worst)/float64(g-1))
	unsteady := likelyThroughput * light
	return worst > struckRatio*min(rest, variance+unsteady*unsteady)
}

// likelyThroughput: what stands out by six times so much of a pixel's light is no
// throughput, however little stands out beside it: two hits hide each other from the mean
// of the other checks.
const likelyThroughput = 0.1

// leastShare is the part of a frame's variance in the checks from which it is judged:
// rows that were lost have none.
const leastShare = 1e-6
