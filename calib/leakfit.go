package calib

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// LeakRule says how a LeakFit measures what closed mirrors send on, e(L) times what
// opening them adds, in the mean over the field: the contrast is 1 + 1/e. With l = L -
// L_c, f_j the decoded light of element j, B_i that of the mirrors outside the field below (i = 0) and
// above (1) it, P_a the Legendre polynomials of rms 1 over the elements or the field's
// rows, an all-off frame of the lamp without bias and dark is
//
//	T(x,y) = sum_j f_j (e(l_j) + E(l_j) s(j,y)) + sum_i (B_i (e(l) + E(l) t_i(y))) + level(amplifier, y)
//	e(l) = p_0 + p_1 l + ... + p_Degree l^Degree
//	s(j,y) = sum_ab s_ab P_a(j) P_b(y),   t_i(y) = sum_b t_ib P_b(y).
//
// E is the colour that the structures take, 1 at L_c: the fit is linear. Mirrors leak
// differently over the device; where the elements that reach a pixel are not all of
// the field, a structure over them looks like a colour. So s and t are fitted as well,
// as random numbers of which no more is known than their size: Structure and Beyond
// times e(0) rms, in the low orders more than in the high (Wiener's way; Tarantola,
// Inverse Problem Theory, 2005, section 3.2, from memory). s has no mean over the
// field, which is e's; the errors of e hold what is not known of s, t and the levels.
type LeakRule struct {
	Degree int
	// Orders are the highest of P over elements and rows, BeyondOrder that of t.
	Orders, BeyondOrder int
	// Structure and Beyond are rms relative to e, Fall is that of the variances: sizes
	// that are possible.
	Structure, Beyond, Fall []float64
	// Model is the part of e that it may be wrong by whatever the data say.
	Model float64
	// Clip as in ColourRule.
	Clip float64
}

// DefaultLeakRule: mirrors leak alike within some 20 % over a device (common practice,
// no source), twice as well or badly. Mirrors outside the field may be the field's equals
// but for the 3 % that slit function and efficiency make. Six orders follow two periods
// over the field; what is finer averages out over the elements in a pixel, but for the
// 1 % by which e scatters on rehearsed nights where noise plays no part.
func DefaultLeakRule() LeakRule {
	return LeakRule{
		Degree: 2, Orders: 6, BeyondOrder: 2, Clip: 6, Model: 0.01,
		Structure: []float64{0.05, 0.1, 0.2, 0.4}, Beyond: []float64{0.03, 0.1, 0.3}, Fall: []float64{0, 1},
	}
}

// LeakFrame describes what the rows of a LeakFit have in common.
type LeakFrame struct {
	Geometry          Geometry
	Elements, Columns int
	// Coded tells which detector rows the field has: those whose mirrors the mean is
	// taken over.
	Coded []bool
	// LevelSigma is, by amplifier, the rms error of a row's level in the all-off mean,
	// which the rows within LevelRows share, in electrons. One more level for all
	// rows of an amplifier is fitted without any such knowledge.
	LevelSigma []float64
	LevelRows  int
}

// LeakRow is a row of the all-off mean.
type LeakRow struct {
	Y              int
	Term, Variance []float32
	Flags          []Flag
	// Light is that of the elements, as in ColourFit.AddRow; nil for a row that no
	// mirror reaches, which tells of levels alone.
	Light [][]float32
	// Before and After are, by column, how many elements' worth of mirrors lie outside
	// the field below element 0 and above the last; nil for none. Their light is taken
	// to be the end elements', shifted along x. Where that would have to come from past
	// the detector's ends, pixels are left out.
	Before, After []float64
	// Amplifier is, by column, the index of the amplifier that reads it.
	Amplifier []uint8
}

// LeakFit gathers the normal equations of a LeakRule. Rows are to be added in one
// order always: sums depend on it in their last bits. What a row adds may be gathered
// beforehand, by Row. Memory: the square of
// unknowns() float64, some 100 of them.
type LeakFit struct {
	rule  LeakRule
	frame LeakFrame
	table *dispersed
	shape *ColourTerm // E; nil for 1

	across      [][]float64 // [a][element], a >= 1 without mean
	first, last int         // coded rows
	rowMean     []float64   // by b, of P_b over coded rows
	blockRows   int
	blocks      int

	normal        *mat.SymDense
	right         []float64
	square        float64
	pixels, clips int
	light         float64
}

// maxLevelBlocks bounds the unknowns of tall detectors.
const maxLevelBlocks = 32

// NewLeakFit begins a fit. shape is an earlier result whose colour the structure is
// to take, nil for none.
func NewLeakFit(rule LeakRule, frame LeakFrame, shape *ColourTerm) (*LeakFit, error) {
	switch {
	case frame.Elements < 1 || frame.Columns < 1:
		return nil, fmt.Errorf("leak fit: %d elements on %d columns", frame.Elements, frame.Columns)
	case rule.Degree < 0 || rule.Orders < 0 || rule.BeyondOrder < 0 || frame.LevelRows < 1:
		return nil, fmt.Errorf("leak fit: degree %d, orders %d and %d, levels of %d rows", rule.Degree, rule.Orders, rule.BeyondOrder, frame.LevelRows)
	case len(rule.Structure) < 1 || len(rule.Beyond) < 1 || len(rule.Fall) < 1:
		return nil, errors.New("leak fit: no size of the structures")
	case len(frame.LevelSigma) < 1:
		return nil, errors.New("leak fit: no amplifier")
	}
	f := &LeakFit{rule: rule, frame: frame, first: len(frame.Coded), last: -1}
	if shape != nil && shape.Coef[0] > 0 {
		f.shape = shape
	}
	f.table = newDispersed(&f.frame.Geometry, frame.Elements, frame.Columns)
	f.across = centredLegendre(frame.Elements, rule.Orders+1)
	for y, coded := range frame.Coded {
		if coded {
			f.first, f.last = min(f.first, y), max(f.last, y)
		}
	}
	f.meanOverRows()
	rows := len(frame.Coded)
	f.blockRows = max(frame.LevelRows, (rows+maxLevelBlocks-1)/maxLevelBlocks)
	f.blocks = (rows + f.blockRows - 1) / f.blockRows
	n := f.unknowns()
	f.normal, f.right = mat.NewSymDense(n, nil), make([]float64, n)
	return f, nil
}

// centredLegendre gives Legendre polynomials of rms 1 over -1..1 at n places, by
// degree; all but the first without their mean.
func centredLegendre(n, degrees int) [][]float64 {
	all := make([][]float64, degrees)
	for a := range all {
		all[a] = make([]float64, n)
	}
	for j := range n {
		for a, p := range unitLegendre((2*float64(j)+1)/float64(n)-1, degrees) {
			all[a][j] = p
		}
	}
	for _, list := range all[1:] {
		mean := 0.0
		for _, p := range list {
			mean += p / float64(n)
		}
		for j := range list {
			list[j] -= mean
		}
	}
	return all
}

// unitLegendre gives the polynomials of degree 0..n-1 of rms 1.
func unitLegendre(x float64, n int) []float64 {
	p := legendre(x, n)
	for a := range p {
		p[a] *= math.Sqrt(float64(2*a + 1))
	}
	return p
}

// along gives the polynomials over the field's rows at a row, held at the field's
// ends beyond them.
func (f *LeakFit) along(y int) []float64 {
	v := 0.0
	if f.last > f.first {
		v = min(1, max(-1, 2*float64(y-f.first)/float64(f.last-f.first)-1))
	}
	return unitLegendre(v, max(f.rule.Orders, f.rule.BeyondOrder)+1)
}

func (f *LeakFit) meanOverRows() {
	f.rowMean = make([]float64, max(f.rule.Orders, f.rule.BeyondOrder)+1)
	count := 0.0
	for y, coded := range f.frame.Coded {
		if coded {
			for b, p := range f.along(y) {
				f.rowMean[b] += p
			}
			count++
		}
	}
	for b := range f.rowMean {
		f.rowMean[b] /= max(count, 1)
	}
}

// The unknowns in their order: e's coefficients, each amplifier's level, the field's
// structure (a, b) without (0, 0), the structure beyond on both sides, levels of
// blocks of rows.

func (f *LeakFit) colours() int  { return f.rule.Degree + 1 }
func (f *LeakFit) levelAt() int  { return f.colours() }
func (f *LeakFit) certain() int  { return f.levelAt() + len(f.frame.LevelSigma) } // unknowns without prior
func (f *LeakFit) beyondAt() int { return f.certain() + (f.rule.Orders+1)*(f.rule.Orders+1) - 1 }
func (f *LeakFit) blocksAt() int { return f.beyondAt() + 2*(f.rule.BeyondOrder+1) }
func (f *LeakFit) unknowns() int { return f.blocksAt() + f.blocks*len(f.frame.LevelSigma) }

// structureAt is the unknown of the field's structure (a, b), not (0, 0).
func (f *LeakFit) structureAt(a, b int) int { return f.certain() + a*(f.rule.Orders+1) + b - 1 }
