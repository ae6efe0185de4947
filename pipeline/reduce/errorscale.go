package reduce

import (
	"math"

	"mirrorloom/pipeline/product"
)

// The error scale q is the scatter of a pixel's dark decodes over what their variance
// says, averaged over scaleWidth columns of its row: what no factor of a frame explains,
// such as seeing, guiding and flexure, spreads over all columns alike, and so shows in
// the dark ones. It multiplies VARIANCE where it is above 1 by scaleSigmas of its own
// standard errors.
const (
	scaleWidth  = 15
	scaleSigmas = 3
)

// scales tells whether the error scale is measured.
func (d *decoder) scales() bool {
	return d.repair != nil && d.code.VarianceUniform() && d.lostFlag() != product.FlagLost
}

// scaleErrors measures the error scale of a row. Pixels with flags do not take part;
// where none does, the scale is 1. With measured and expected variances m and e of g
// degrees of freedom a pixel,
//
//	q = sum m / sum e,   var(q) = 2/g sum e^2 / (sum e)^2
//
// Errors of seeing and the like are as smooth as the light that makes them: neighbouring
// pixels share them, and a voxel made of several does not average them out. The part of
// the excess q-1 that they share is that of the products c of neighbours' dark decodes,
// sum c / sum(m-e): applied is 1 + (q-1)(1-part), coherent (q-1) part.
func (d *decoder) scaleErrors(row *decodedRow) {
	for x := range row.scale {
		row.scale[x], row.applied[x], row.coherent[x] = 1, 1, 0
	}
	if !d.scales() {
		return
	}
	dof := d.repair.lost.DarkShare * float64(len(d.darkColumns))
	const reach = scaleWidth / 2
	for x := range row.measured {
		// Sums anew for each column: a running sum would keep the rounding of a bright
		// pixel's on the faint ones that follow.
		var s scaleWindow
		for near := max(0, x-reach); near <= min(len(row.measured)-1, x+reach); near++ {
			s.add(row, near)
		}
		if !(s.expected > 0) || !(dof > 0) {
			continue
		}
		q := s.measured / s.expected
		row.scale[x] = float32(q)
		if q-1 > scaleSigmas*math.Sqrt(2/dof*s.square)/s.expected {
			part := s.shared()
			row.applied[x], row.coherent[x] = float32(1+(q-1)*(1-part)), float32((q-1)*part)
		}
	}
}

// scaleWindow sums over the columns that a scale is averaged over.
type scaleWindow struct {
	measured, expected, square float64
	along                      float64
	pixels, pairs              int
}

func (s *scaleWindow) add(row *decodedRow, x int) {
	if row.measured[x] == unmeasured {
		return
	}
	e := float64(row.expected[x])
	s.measured += float64(row.measured[x])
	s.expected += e
	s.square += e * e
	s.pixels++
	// The last pixel of a block has no product.
	if x+1 < len(row.measured) && row.measured[x+1] != unmeasured && row.along[x] != 0 {
		s.along += float64(row.along[x])
		s.pairs++
	}
}

// shared is the part of the excess that neighbouring pixels share, 0 to 1.
func (s *scaleWindow) shared() float64 {
	if s.pairs == 0 {
		return 0
	}
	excess := (s.measured - s.expected) / float64(s.pixels)
	return min(1, max(0, s.along/float64(s.pairs)/excess))
}
