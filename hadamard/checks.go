package hadamard

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// ErrNoChecks is returned, wrapped, when a code has no dark column to check with.
var ErrNoChecks = errors.New("there is no dark column")

// Checks is what the dark columns D of a code say about its readings: A_D y = 0 for
// every y = Wf that leaves them dark. A check is a vector u of the row space of
// Ag = A_D, and u'y holds no light, only noise and what went wrong. The space has
// G dimensions; P is the projector on it.
//
// WithoutPedestal and WithoutRows leave the checks of a smaller space, those blind to
// a pedestal or to rows that were lost; everything else goes on as before.
//
// A Checks never changes and is safe for concurrent use. The matrices that it returns
// are copies.
type Checks struct {
	code     *Code
	columns  []int
	pedestal bool  // projected out
	lost     []int // rows projected out, sorted

	// mix is T (G x g), basis T Ag with orthonormal rows (G x v); nil when G is 0.
	mix, basis *mat.Dense
	// inverse is X = T'T (g x g), the inverse of Ag Ag' on what is left.
	inverse *mat.SymDense
	// own and common are X = own I + common J where lost is empty.
	own, common float64
	projector   *mat.SymDense
}

// NewChecks makes the checks of a set of dark columns, in any order.
//
// Errors: ErrNoRedundancy for a slit scan, ErrNoChecks for an empty set (both
// wrapped); a column outside 0..v-1 or named twice.
func NewChecks(c *Code, dark []int) (*Checks, error) {
	if c.family == SlitScan {
		return nil, fmt.Errorf("%w: leave the dark set empty", ErrNoRedundancy)
	}
	if len(dark) == 0 {
		return nil, fmt.Errorf("%w: plan the sequence with some to check its frames", ErrNoChecks)
	}
	sorted, err := sortedIndices("dark column", dark, c.v)
	if err != nil {
		return nil, err
	}
	return newChecks(c, sorted), nil
}

// sortedIndices is a sorted copy of a list of different indices below v.
func sortedIndices(what string, list []int, v int) ([]int, error) {
	sorted := slices.Clone(list)
	slices.Sort(sorted)
	for i, j := range sorted {
		if j < 0 || j >= v {
			return nil, fmt.Errorf("%s %d is outside 0..%d", what, j, v-1)
		}
		if i > 0 && sorted[i-1] == j {
			return nil, fmt.Errorf("%s %d is named twice", what, j)
		}
	}
	return sorted, nil
}

// newChecks takes any sorted set, the empty one too (a half of a set of one).
//
// A A' = (I - (l/k^2) J)/(k-l), so that (Ag Ag')^-1 = (k-l) (I + x J) with
// x = (l/k^2)/(1 - g l/k^2), and its square root is of the same form.
func newChecks(c *Code, sorted []int) *Checks {
	out := &Checks{code: c, columns: sorted}
	g := len(sorted)
	if g == 0 {
		return out.finish(nil)
	}
	k, l, n := float64(c.k), float64(c.l), float64(g)
	shared := l / (k * k)
	root := (1/math.Sqrt(1-n*shared) - 1) / n
	scale := math.Sqrt(k - l)
	mix := mat.NewDense(g, g, nil)
	for i := range g {
		for j := range g {
			mix.Set(i, j, scale*root)
		}
		mix.Set(i, i, scale*(1+root))
	}
	out.own, out.common = k-l, (k-l)*shared/(1-n*shared)
	return out.finish(mix)
}

// finish fills in what follows from mix.
func (c *Checks) finish(mix *mat.Dense) *Checks {
	g, v := len(c.columns), c.code.v
	c.projector = mat.NewSymDense(v, nil)
	if g > 0 {
		c.inverse = mat.NewSymDense(g, nil)
	}
	if mix == nil {
		c.own, c.common = 0, 0
		return c
	}
	c.mix, c.basis = mix, new(mat.Dense)
	c.basis.Mul(mix, c.darkRows())
	c.projector.SymOuterK(1, c.basis.T())
	c.inverse.SymOuterK(1, mix.T())
	return c
}

// darkRows is Ag.
func (c *Checks) darkRows() *mat.Dense {
	open, closed := c.code.InverseEntries()
	ag := mat.NewDense(len(c.columns), c.code.v, nil)
	for i, j := range c.columns {
		row := ag.RawRowView(i)
		for k := range row {
			row[k] = closed
			if c.code.Bit(k, j) == 1 {
				row[k] = open
			}
		}
	}
	return ag
}

// G is the number of independent checks: one a dark column, less one without the
// pedestal, less the rank of Ag's columns of the lost rows.
func (c *Checks) G() int {
	if c.mix == nil {
		return 0
	}
	n, _ := c.mix.Dims()
	return n
}

// Code is the code that is checked.
func (c *Checks) Code() *Code { return c.code }

// Columns are the dark columns, sorted.
func (c *Checks) Columns() []int { return slices.Clone(c.columns) }

// Lost are the rows that WithoutRows took out, sorted.
func (c *Checks) Lost() []int { return slices.Clone(c.lost) }

// Reliable tells whether there are dark columns enough, 2 log2 v, that two faults
// rarely leave the same mark; with less, audit, throughput and repairs are off.
func (c *Checks) Reliable() bool {
	return float64(len(c.columns)) >= 2*math.Log2(float64(c.code.v))
}

// split is a way to part the checks: what is fitted on one part is judged on the other.
type split struct{ fit, judge *Checks }

// A half of this many checks measures throughput about as well as all of them; with fewer,
// three quarters of them are fitted at a time: half of a small dark set sees so few
// patterns that its fit may be worse than none where that of all checks is good.
const enoughChecks = 32

// splits parts the checks in two or four, each of them judged once by what the others fit.
// The parts are orthogonal sets of directions in the space of the checks, so that their
// noise is independent. Of one check there is one part, judged by a fit that nothing backs.
func (c *Checks) splits() []split {
	n := 4
	if c.G() >= 2*enoughChecks {
		n = 2
	}
	n = min(n, max(1, c.G()))
	all := make([]split, n)
	for i := range all {
		var in, out []int
		for d := range c.G() {
			if d%n == i {
				out = append(out, d)
			} else {
				in = append(in, d)
			}
		}
		all[i] = split{c.directions(in), c.directions(out)}
	}
	return all
}

// directions leaves some of the rows of mix.
func (c *Checks) directions(list []int) *Checks {
	out := &Checks{code: c.code, columns: c.columns, pedestal: c.pedestal, lost: c.lost}
	if len(list) == 0 {
		return out.finish(nil)
	}
	mix := mat.NewDense(len(list), len(c.columns), nil)
	for i, d := range list {
		mix.SetRow(i, c.mix.RawRowView(d))
	}
	return out.finish(mix)
}

// WithoutPedestal leaves the checks that a reading constant over the steps (bias, dark
// current, leak, in any pixel) passes unseen: it adds the same to every dark decode, so
// that their differences from their mean are left. It costs one check.
func (c *Checks) WithoutPedestal() *Checks {
	if c.pedestal {
		return c
	}
	ones := mat.NewDense(c.code.v, 1, nil)
	for i := range c.code.v {
		ones.Set(i, 0, 1)
	}
	out := c.without(ones)
	out.pedestal = true
	if len(c.lost) == 0 && out.mix != nil {
		// The pedestal's mark is the same in all columns: X becomes (k-l)(I - J/g).
		out.own, out.common = c.own, -c.own/float64(len(c.columns))
	}
	return out
}

// WithoutRows leaves the checks that do not touch the given code rows, whatever their
// readings hold: P is then zero in those rows and columns. It costs as many checks as
// Ag's columns of those rows have rank, at most one each.
//
// Errors: a row outside 0..v-1 or named twice.
func (c *Checks) WithoutRows(rows []int) (*Checks, error) {
	sorted, err := sortedIndices("row", rows, c.code.v)
	if err != nil {
		return nil, err
	}
	return c.withoutRows(sorted), nil
}

func (c *Checks) withoutRows(rows []int) *Checks {
	if len(rows) == 0 {
		return c
	}
	marks := mat.NewDense(c.code.v, len(rows), nil)
	for i, k := range rows {
		marks.Set(k, i, 1)
	}
	out := c.without(marks)
	out.lost = append(out.lost, rows...)
	slices.Sort(out.lost)
	out.lost = slices.Compact(out.lost)
	for _, k := range out.lost { // zero but for rounding
		for i := range c.code.v {
			out.projector.SetSym(k, i, 0)
		}
		for i := range out.G() {
			out.basis.Set(i, k, 0)
		}
	}
	return out
}

// negligible is how small a singular value is against the largest possible where it
// stands for zero: entries of A are exact to 1e-16, and marks that rows leave on
// dark columns are either dependent or far from it.
const negligible = 1e-9

// without leaves the checks u with u'x = 0 for every column of x (v x m).
func (c *Checks) without(x *mat.Dense) *Checks {
	out := &Checks{code: c.code, columns: c.columns, pedestal: c.pedestal, lost: slices.Clone(c.lost)}
	if c.mix == nil {
		return out.finish(nil)
	}
	var marks mat.Dense
	marks.Mul(c.basis, x)
	var svd mat.SVD
	if !svd.Factorize(&marks, mat.SVDFullU) {
		return out.finish(nil) // no checks rather than wrong ones
	}
	rank := 0
	for _, s := range svd.Values(nil) {
		if s > negligible*mat.Norm(x, 2) {
			rank++
		}
	}
	dof := c.G()
	if rank >= dof {
		return out.finish(nil)
	}
	var u, mix mat.Dense
	svd.UTo(&u)
	mix.Mul(u.Slice(0, dof, rank, dof).T(), c.mix)
	return out.finish(&mix)
}

// Rows is Ag P (g x v): Ag with what was projected out taken from it. Its rank is G.
func (c *Checks) Rows() *mat.Dense {
	rows := c.darkRows()
	rows.Mul(rows, mat.DenseCopyOf(c.projector))
	return rows
}

// Projector is P (v x v), the orthogonal projector on the checks.
func (c *Checks) Projector() *mat.SymDense {
	p := mat.NewSymDense(c.code.v, nil)
	p.CopySym(c.projector)
	return p
}

// Basis is an orthonormal basis of the checks (G x v), nil when there are none: for
// readings of unit variance the noise of Basis y is independent and of unit variance.
func (c *Checks) Basis() *mat.Dense {
	if c.basis == nil {
		return nil
	}
	return mat.DenseCopyOf(c.basis)
}
