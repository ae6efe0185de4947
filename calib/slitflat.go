package calib

import (
	"fmt"
	"math"
)

// FlatRule says how the slit function and the efficiency are fitted.
type FlatRule struct {
	// ShortestPeriod and LongestPeriod, in voxels, bound the Smoother of the
	// efficiency along the wavelength; between them the one of least Risk is taken
	// for all elements. At least 30 px.
	ShortestPeriod, LongestPeriod float64
	// SlitPeriod, in rows, is the Smoother's of the slit function along the slit.
	SlitPeriod float64
	// ColourDegree is the degree of the polynomial over the band by which the lamp
	// may differ from the light that is known of it.
	ColourDegree int
	// Floor is the least response, and the largest relative error MaxError, that a
	// voxel is divided by; else it is LowFlat.
	Floor, MaxError float64
	// FullyLit is the share of full light from which a row takes part in the fit.
	FullyLit float64
	// AlongWavelength and AlongSlit are the variance of a sum of neighbouring voxels
	// over the sum of their variances: 1 for independent ones; see Correlation.
	AlongWavelength, AlongSlit float64
}

// DefaultFlatRule: periods of 30 to 120 voxels, the slit over 20 rows, a parabola of
// colour, at least a tenth of the mean response known to 5 %, rows lit by 99 %,
// independent voxels.
func DefaultFlatRule() FlatRule {
	return FlatRule{ShortestPeriod: 30, LongestPeriod: 120, SlitPeriod: 20, ColourDegree: 2,
		Floor: 0.1, MaxError: 0.05, FullyLit: 0.99, AlongWavelength: 1, AlongSlit: 1}
}

// FlatFit fits the decoded coded lamp flat on the cube's grid by
//
//	F(j, y, L) = lamp(L) colour(L) s(j, y) b(j, L)
//
// with lamp the known relative light (black body times the profile's throughput),
// colour a polynomial common to all elements, s the slit function and b the smooth
// efficiency of each element: weighted alternating least squares (Wold 1966) on
// sums that strips add to, so that the flat cube is never held.
//
// One pass over the flat is exact but for voxels that are missing in some rows of an
// element and not in others: what b and colour deviate there from their mean stays in
// s, 1e-3 at worst for 2 % of them. A second pass after Solve takes the solution as
// its template and leaves 1e-5. The first may be made on every tenth row.
type FlatFit struct {
	rule                   FlatRule
	elements, rows, voxels int
	lamp                   []float64 // [voxel]
	lit                    []float32 // [row][element]; nil: all 1
	template               []float32 // [voxel][element]: lamp colour b
	// Of each row and element: sum w t F and sum w t^2, t the template.
	slitTop, slitBottom []float64 // [row][element]
	// Of each voxel and element: sum w u F and sum w u^2, u = s lamp.
	bandTop, bandBottom []float64 // [voxel][element]
}

// NewFlatFit begins a fit for a cube of elements x rows x voxels. lamp is the known
// light of each voxel in any unit, 0 where there is none. lit is the share of a fully
// lit row that reaches detector row y of element j, [row][element] (Illumination),
// or nil for all 1: the slit's ends, whose fall is no response, are left out of the
// fit, and s continues smoothly there.
func NewFlatFit(rule FlatRule, elements, rows, voxels int, lamp []float64, lit []float32) (*FlatFit, error) {
	if elements < 1 || rows < 1 || len(lamp) != voxels || (lit != nil && len(lit) != rows*elements) {
		return nil, fmt.Errorf("flat: %d elements, %d rows and %d voxels do not suit %d values of the lamp and %d of the slit", elements, rows, voxels, len(lamp), len(lit))
	}
	if voxels <= rule.ColourDegree {
		return nil, fmt.Errorf("flat: %d voxels do not fix a colour of degree %d; shorten flat.colour_degree or lengthen the grid", voxels, rule.ColourDegree)
	}
	f := &FlatFit{
		rule: rule, elements: elements, rows: rows, voxels: voxels, lamp: lamp, lit: lit,
		template: make([]float32, voxels*elements),
		slitTop:  make([]float64, rows*elements), slitBottom: make([]float64, rows*elements),
		bandTop: make([]float64, voxels*elements), bandBottom: make([]float64, voxels*elements),
	}
	for l, v := range lamp {
		if !(v >= 0) || math.IsInf(v, 1) {
			return nil, fmt.Errorf("flat: the lamp's known light at voxel %d is %g; it must be 0 or more", l, v)
		}
		for j := range elements {
			f.template[l*elements+j] = float32(v)
		}
	}
	return f, nil
}

// AddStrip adds elements j0..j1-1 of rows y0..y0+h-1 of the flat cube: slices in the
// cube's order [voxel][row][element] of all elements, flux in any unit with its
// variance. Voxels with any bit of flags, or without a positive variance, are left
// out. Strips of one element come in the order of rows, so that sums do not depend
// on who adds; different ranges of elements may be added at the same time.
func (f *FlatFit) AddStrip(y0, h int, signal, variance []float32, flags []Flag, j0, j1 int) {
	weights := make([]float64, f.voxels*(j1-j0))
	for row := range h {
		if y := y0 + row; y >= 0 && y < f.rows {
			f.addRow(y, flatRow{signal, variance, flags, row * f.elements, h * f.elements, weights}, j0, j1)
		}
	}
}
