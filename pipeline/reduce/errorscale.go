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

// scaleErrors measures the error scale of a row: row.scale, and row.applied, which is 1
// where the scale may be chance. Pixels with flags do not take part; where none does,
// the scale is 1. With measured and expected variances m and e of g degrees of freedom
// a pixel,
//
//	q = sum m / sum e,   var(q) = 2/g sum e^2 / (sum e)^2
func (d *decoder) scaleErrors(row *decodedRow) {
	for x := range row.scale {
		row.scale[x], row.applied[x] = 1, 1
	}
	if !d.scales() {
		return
	}
	dof := d.repair.darkShare() * float64(len(d.darkColumns))
	var sum, noise, square float64
	use := func(x int, sign float64) {
		if x < 0 || x >= len(row.measured) || row.measured[x] == unmeasured {
			return
		}
		e := float64(row.expected[x])
		sum += sign * float64(row.measured[x])
		noise += sign * e
		square += sign * e * e
	}
	const reach = scaleWidth / 2
	for x := range row.measured {
		// Sums anew for each column: a running sum would keep the rounding of a bright
		// pixel's on the faint ones that follow.
		sum, noise, square = 0, 0, 0
		for near := x - reach; near <= x+reach; near++ {
			use(near, 1)
		}
		if !(noise > 0) || !(dof > 0) {
			continue
		}
		q := sum / noise
		row.scale[x] = float32(q)
		if q-1 > scaleSigmas*math.Sqrt(2/dof*square)/noise {
			row.applied[x] = float32(q)
		}
	}
}
