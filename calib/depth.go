package calib

import "math"

// Depth tells how deep a flat field goes: how far deviations from flatness average
// down with the light, and where they stop. Feed it the corrected flat's relative
// deviations with the photon noise expected of them; it bins them into cells of 1, 2,
// 4 ... 2^(levels-1) rows and as many voxels. Where the rms stays above the noise,
// structure is left. A flat that was itself fitted must not be used: take another
// cycle, or the other half of the frames.
type Depth struct {
	elements, voxels int
	levels           []depthLevel
}

type depthLevel struct {
	side           int
	sum, expected  []float64 // [element][cell]: sum of weighted deviations and their variance
	weight, voxels []float64
	square, noise  float64
	cells, lastRow int
}

// DepthPoint is one size of cells.
type DepthPoint struct {
	Side     int     // rows and voxels of a cell
	Cells    int     // whole cells
	SN       float64 // expected: 1/rms of the photon noise of a cell
	RMS      float64 // of the cells' deviations
	RMSError float64 // standard error of RMS
	// Excess is the rms beyond the noise, sqrt(RMS^2 - 1/SN^2), 0 where it is none.
	Excess, ExcessError float64
}

// NewDepth is for rows of elements x voxels and cells of up to 2^(levels-1).
func NewDepth(elements, voxels, levels int) *Depth {
	d := &Depth{elements: elements, voxels: voxels}
	for k := range levels {
		side := 1 << k
		n := elements * (voxels / side)
		d.levels = append(d.levels, depthLevel{side: side, lastRow: -1, sum: make([]float64, n), expected: make([]float64, n), weight: make([]float64, n), voxels: make([]float64, n)})
	}
	return d
}

// AddRow adds a row of all elements, [voxel][element]: signal and variance of the
// corrected flat, expected the light it should have, and what Correlation says. Rows come in order; flagged
// voxels are left out of their cells, and cells that have lost half of theirs are.
func (d *Depth) AddRow(signal, variance, expected []float32, flags []Flag, alongWavelength, alongSlit float64) {
	for k := range d.levels {
		level := &d.levels[k]
		level.lastRow++
		inflation := 1.0
		if level.side > 1 {
			inflation = alongWavelength * alongSlit
		}
		for l := range level.side * (d.voxels / level.side) {
			for j := range d.elements {
				i := l*d.elements + j
				if e := float64(expected[i]); flags[i] == 0 && variance[i] > 0 && e > 0 {
					cell := j*(d.voxels/level.side) + l/level.side
					level.sum[cell] += float64(signal[i]) - e
					level.expected[cell] += inflation * float64(variance[i])
					level.weight[cell] += e
					level.voxels[cell]++
				}
			}
		}
		if (level.lastRow+1)%level.side == 0 {
			level.close()
		}
	}
}

func (d *depthLevel) close() {
	for i, w := range d.weight {
		if 2*d.voxels[i] > float64(d.side*d.side) {
			d.square += d.sum[i] * d.sum[i] / (w * w)
			d.noise += d.expected[i] / (w * w)
			d.cells++
		}
		d.sum[i], d.expected[i], d.weight[i], d.voxels[i] = 0, 0, 0, 0
	}
}

// Points lists the sizes that have cells.
func (d *Depth) Points() []DepthPoint {
	var out []DepthPoint
	for _, l := range d.levels {
		if l.cells == 0 || !(l.noise > 0) {
			continue
		}
		n := float64(l.cells)
		p := DepthPoint{Side: l.side, Cells: l.cells, SN: math.Sqrt(n / l.noise), RMS: math.Sqrt(l.square / n)}
		p.RMSError = p.RMS / math.Sqrt(2*n)
		// The error of the excess' square is that of RMS^2; near 0 its root is taken.
		p.Excess = math.Sqrt(max(0, (l.square-l.noise)/n))
		squareError := p.RMS * p.RMS * math.Sqrt(2/n)
		p.ExcessError = squareError / (2 * max(p.Excess, math.Sqrt(squareError)/2))
		out = append(out, p)
	}
	return out
}
