package rehearse

import "math"

// Voxels are rectangles in straightened coordinates: a voxel holds what lies
// between two wavelengths and between trace rows y0 - 1/2 and y0 + 1/2. With
// y = eta + trace(x) it is
//
//	int deta [ D(x+(eta), eta) - D(x-(eta), eta) ],  D(x, eta) = int^x f(x', eta + trace(x')) dx',
//
// x-+ the columns at which the two wavelengths cross the curve of that eta.
//
// Along the curve a mirror row's spot is G(x - X) G(eta - eta_w + d) with
// d = trace(x) - trace(X) = s D + c D^2, D = x - X, s the trace's slope at X; it is
// expanded to second order in d, which is below 0.01 px: (s D)^3 leaves 1e-6.
// Each order k is a sum over the grid with the kernel int D^k G.
//
// eta runs over half rows; the integral over a row is that of the polynomial
// through the seven nearest, which errs by 7e-6 of a peak at sigma = 1.27 px. The
// sum over all rows is the trapezoidal rule's, exact for spots: no light is lost
// between voxels.

// voxelReach is how far beyond its centre a voxel's nodes lie, rows.
const voxelReach = 1.5

// rowNodes are the nodes' distances from the row in half rows, and rowWeights
// int over -1/2..1/2 of their Lagrange polynomials.
const rowNodes = 7

var rowNodeWeights = lagrangeIntegrals()

// lagrangeIntegrals integrates the Lagrange polynomials of nodes -1.5, -1 ... 1.5
// over -1/2..1/2 by Gauss's rule of four points, exact to order 7.
func lagrangeIntegrals() (weights [rowNodes]float64) {
	nodes := [4]float64{-0.8611363115940526, -0.3399810435848563, 0.3399810435848563, 0.8611363115940526}
	parts := [4]float64{0.3478548451374538, 0.6521451548625461, 0.6521451548625461, 0.3478548451374538}
	for k := range weights {
		for i, node := range nodes {
			x, value := node/2, 1.0
			for m := range rowNodes {
				if m != k {
					value *= (x - (float64(m)/2 - voxelReach)) / (float64(k-m) / 2)
				}
			}
			weights[k] += parts[i] / 2 * value
		}
	}
	return weights
}

// edgeNodes is how many grid points D is interpolated from at a voxel's edge:
// the error is that of pointWeights.
const edgeNodes = lineNodes

// voxelizer draws voxels; one serves one goroutine.
type voxelizer struct {
	o *optics
	// edges are the dispersed distances of the wavelengths between voxels.
	edges []float64
	// shift is the trace's shift where rows have their own number.
	shift float64
	// slope[i] is the trace's slope at grid point i.
	slope []float64

	sums, terms [3][]float64
	running     []float64
	places      []float64
	atEdges     []float64
	rows        [][]float64
}

// newVoxelizer prepares voxels for strips of up to `rows` rows. Rows are numbered
// where the trace is at column xLabel.
func (o *optics) newVoxelizer(rows int, xLabel float64) *voxelizer {
	grid := o.profile.Grid
	v := &voxelizer{o: o, shift: o.geometry.trace(xLabel), slope: make([]float64, o.axis.n)}
	for i := range grid.Count + 1 {
		v.edges = append(v.edges, o.geometry.dispersed(grid.WavelengthNM(float64(i)-0.5)))
	}
	for i := range v.slope {
		v.slope[i] = o.geometry.traceSlope(o.axis.at(i))
	}
	for k := range v.sums {
		v.sums[k], v.terms[k] = make([]float64, o.axis.n), make([]float64, o.axis.n)
	}
	v.running = make([]float64, o.axis.n)
	v.atEdges, v.places = make([]float64, len(v.edges)), make([]float64, len(v.edges))
	for range rows {
		v.rows = append(v.rows, make([]float64, grid.Count))
	}
	return v
}

// draw computes the voxels of an element whose middle lies `across` px from
// that of the field, for all rows of a strip: the result is v.rows[y - y0][voxel],
// valid until the next call, electrons per second, NaN where a voxel leaves the
// drawing grid.
func (v *voxelizer) draw(s *strip, light []density, across float64) [][]float64 {
	rows := v.rows[:s.y1-s.y0]
	for _, row := range rows {
		clear(row)
	}
	for node := 2*s.y0 - 3; node <= 2*(s.y1-1)+3; node++ {
		if !v.along(s, light, float64(node)/2-v.shift, across) {
			continue
		}
		for k, weight := range rowNodeWeights {
			if twice := node - (k - 3); twice&1 == 0 && twice/2 >= s.y0 && twice/2 < s.y1 {
				v.addDifferences(rows[twice/2-s.y0], weight)
			}
		}
	}
	return rows
}

// addDifferences adds what lies between the edges.
func (v *voxelizer) addDifferences(row []float64, weight float64) {
	if v.edges[len(v.edges)-1] < v.edges[0] {
		weight = -weight
	}
	for i := range row {
		row[i] += weight * (v.atEdges[i+1] - v.atEdges[i])
	}
}

// along fills atEdges with D at the voxels' edges for one eta: NaN for an edge
// off the drawing grid. False where no light comes near and no edge is off.
func (v *voxelizer) along(s *strip, light []density, eta, across float64) bool {
	g, a := &v.o.geometry, v.o.axis
	first, last, off := a.n, -1, false
	for i, px := range v.edges {
		at := (g.onTrace(g.XCenterPx+across+px, eta) - a.x0) * perPixel
		v.places[i] = at
		if at < edgeNodes/2-1 || at >= float64(a.n-edgeNodes/2) {
			v.places[i], off = math.NaN(), true
			continue
		}
		first, last = min(first, int(at)-(edgeNodes/2-1)), max(last, int(at)+edgeNodes/2)
	}
	from, to := v.sumMirrors(s, light, eta)
	if from >= to && !off {
		return false
	}
	if last >= first {
		v.integrate(from, to, first, last)
	}
	for i, at := range v.places {
		v.atEdges[i] = math.NaN()
		if at == at {
			v.atEdges[i] = interpolate(v.running, at)
		}
	}
	return true
}

// interpolate reads values between the points of a list with the polynomial
// through edgeNodes of them.
func interpolate(values []float64, at float64) float64 {
	whole := math.Floor(at)
	first := int(whole) - (edgeNodes/2 - 1)
	weights := pointWeights(at - whole)
	return dot(values[first:first+edgeNodes], weights[:])
}

// sumMirrors weighs the mirror rows by the spot across the trace and its first
// two derivatives, into sums, and makes the terms of the three kernels of it.
func (v *voxelizer) sumMirrors(s *strip, light []density, eta float64) (from, to int) {
	sigma := v.o.spread.sigma
	from, to = v.o.axis.n, 0
	for k, m := range s.mirrors {
		d := &light[k]
		if math.Abs(eta-m.row) < reachSigmas*sigma && d.from < d.to {
			from, to = min(from, d.from), max(to, d.to)
		}
	}
	if from >= to {
		return from, to
	}
	for k := range v.sums {
		clear(v.sums[k][from:to])
	}
	for k, m := range s.mirrors {
		off, d := eta-m.row, &light[k]
		if math.Abs(off) >= reachSigmas*sigma || d.from >= d.to {
			continue
		}
		g0 := bell(off, sigma)
		g1 := -off / (sigma * sigma) * g0
		g2 := (off*off/(sigma*sigma) - 1) / (sigma * sigma) * g0
		addThree(v.sums[0][d.from:d.to], v.sums[1][d.from:d.to], v.sums[2][d.from:d.to], d.h[d.from:d.to], g0, g1, g2)
	}
	curve := v.o.geometry.TraceCurvePerPx
	for i := from; i < to; i++ {
		slope := v.slope[i]
		v.terms[0][i] = v.sums[0][i]
		v.terms[1][i] = slope * v.sums[1][i]
		v.terms[2][i] = curve*v.sums[1][i] + 0.5*slope*slope*v.sums[2][i]
	}
	return from, to
}

// addThree adds multiples of h to three sums.
func addThree(s0, s1, s2, h []float64, g0, g1, g2 float64) {
	s0, s1, s2 = s0[:len(h)], s1[:len(h)], s2[:len(h)]
	for i, x := range h {
		s0[i] += g0 * x
		s1[i] += g1 * x
		s2[i] += g2 * x
	}
}

// integrate fills running[first..last] with D at the grid points, from the
// terms; only points from <= i < to of these are not 0.
func (v *voxelizer) integrate(from, to, first, last int) {
	sp := v.o.spread
	taps := sp.taps
	whole := 0.0 // what lies behind, out of the kernels' reach
	next := from
	for i := first; i <= last; i++ {
		for ; next < to && next < i-taps; next++ {
			whole += gridStep * (v.terms[0][next] + sp.sigma*sp.sigma*v.terms[2][next])
		}
		lo, hi := max(i-taps, from), min(i+taps+1, to)
		value := whole
		if lo < hi {
			k := lo - i + taps
			value += dot(v.terms[0][lo:hi], sp.below0[k:]) + dot(v.terms[1][lo:hi], sp.below1[k:]) + dot(v.terms[2][lo:hi], sp.below2[k:])
		}
		v.running[i] = value
	}
}
