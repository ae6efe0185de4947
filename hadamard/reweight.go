package hadamard

import (
	"fmt"
	"math"
	"strings"
	"sync"

	"gonum.org/v1/gonum/blas/blas32"
	"gonum.org/v1/gonum/mat"
)

// SingularError tells that lost rows cannot be restored from the dark columns: the
// marks that they leave there are linearly dependent.
type SingularError struct {
	// Rows are the rows that take part in a dependence, sorted: repeat one of them
	// for each rank that lacks.
	Rows []int
	// Lost is the number of lost rows, Rank that of their marks.
	Lost, Rank int
}

func (e *SingularError) Error() string {
	names := make([]string, len(e.Rows))
	for i, k := range e.Rows {
		names[i] = fmt.Sprint(k)
	}
	return fmt.Sprintf("%d lost code rows leave marks of rank %d on the dark columns: rows %s cannot be told apart; repeat %d of them",
		e.Lost, e.Rank, strings.Join(names, ", "), e.Lost-e.Rank)
}

// Reweighting decodes readings of unequal noise, or with rows lost, as well as the dark
// columns allow: f = A y + T r with r the dark decodes Ag y.
type Reweighting struct {
	// T (v x g) holds a row for each code column. For the lit ones A + T Ag is the
	// generalised least-squares decode, which is blind to the lost rows. For the dark
	// ones it restores lost rows only, so that their decodes stay what they are: the
	// residual that no lost row explains.
	T *mat.Dense
	// Growth is the mean variance of the lit columns over what they would have were
	// all rows as noisy as the mean of those at hand; ColumnGrowth has it by column, 0
	// for dark ones. Square roots give the growth of the noise.
	Growth       float64
	ColumnGrowth []float64
	// Gain is the mean variance of the plain decode A y over that of this one; +Inf
	// with lost rows.
	Gain float64

	checks  *Checks
	weights []float32 // T
	scratch sync.Pool // *[]float32
}

// Reweight prepares the decode of rows with the given relative noise variances; +Inf
// is a lost row, whose readings may then hold anything finite (best the mean of the
// others, for the digits' sake).
//
// With N = diag(noise), the unbiased decode of least variance under f_D = 0 is
// A y - A N Ag' (Ag N Ag')^-1 Ag y (Aitken 1935, Proc. R. Soc. Edinb. 55, 42). Lost
// rows K are its limit: their errors come from the generalised least squares e =
// -(M'C^-1 M)^-1 M'C^-1 r with M = Ag[:,K], C = Ag N Ag' of the other rows.
//
// A Checks WithoutPedestal or WithoutRows is taken with all its dark columns: nothing
// but the noise decides here.
//
// Errors: a length other than v; a variance that is negative or NaN; *SingularError.
func (c *Checks) Reweight(noise []float64) (*Reweighting, error) {
	v := c.code.v
	if len(noise) != v {
		return nil, fmt.Errorf("reweight: %d noise variances for %d code rows", len(noise), v)
	}
	var lost []int
	finite, mean := make([]float64, v), 0.0
	for k, n := range noise {
		switch {
		case math.IsInf(n, 1):
			lost = append(lost, k)
			continue
		case math.IsNaN(n) || n < 0 || math.IsInf(n, -1):
			return nil, fmt.Errorf("reweight: code row %d has the noise variance %g; it must be 0 or more, +Inf for a lost row", k, n)
		}
		finite[k] = n
		mean += n
	}
	if len(lost) == v || mean == 0 {
		return nil, fmt.Errorf("reweight: none of the %d code rows has a noise variance that is finite and above zero", v)
	}
	mean /= float64(v - len(lost))
	for k := range finite { // of order 1, for the digits' sake
		finite[k] /= mean
	}
	return c.reweight(finite, lost)
}

// reweight takes noise with 0 in the lost rows.
func (c *Checks) reweight(noise []float64, lost []int) (*Reweighting, error) {
	v, g := c.code.v, len(c.columns)
	ag, a := c.darkRows(), c.code.inverse()
	if len(lost) > 0 {
		if err := independent(columnsOf(ag, lost), lost); err != nil {
			return nil, err
		}
	}
	var weighted, inner mat.Dense // N Ag', C
	weighted.Apply(func(k, _ int, x float64) float64 { return x * noise[k] }, ag.T())
	inner.Mul(ag, &weighted)
	var factor mat.Cholesky
	if ok := factor.Factorize(symmetric(&inner)); !ok || factor.Cond() > 1e12 {
		return nil, fmt.Errorf("reweight: the %d rows that are not lost leave the %d dark columns undetermined; repeat the lost ones", v-len(lost), g)
	}
	restore, err := restoration(ag, &factor, lost)
	if err != nil {
		return nil, err
	}
	t := mat.NewDense(v, g, nil)
	left := identity(g) // what restoration leaves of r
	if restore != nil {
		t.Mul(columnsOf(a, lost), restore)
		var explained mat.Dense
		explained.Mul(columnsOf(ag, lost), restore)
		left.Add(left, &explained)
	}
	var cross, gain, change mat.Dense // A N Ag', T0
	cross.Mul(a, &weighted)
	if err := factor.SolveTo(&gain, cross.T()); err != nil && !isCondition(err) {
		return nil, err
	}
	change.Mul(gain.T(), left)
	dark := c.isDark()
	for j := range v {
		if !dark[j] {
			row := t.RawRowView(j)
			for i := range row {
				row[i] -= change.At(j, i)
			}
		}
	}
	return c.newReweighting(t, a, ag, noise, len(lost)), nil
}

// restoration is -(M'C^-1 M)^-1 M'C^-1 (|K| x g), nil for no lost rows: times r, it is
// what the lost rows lack.
func restoration(ag *mat.Dense, factor *mat.Cholesky, lost []int) (*mat.Dense, error) {
	if len(lost) == 0 {
		return nil, nil
	}
	marks := columnsOf(ag, lost)
	var weighted, normal, out mat.Dense
	if err := factor.SolveTo(&weighted, marks); err != nil && !isCondition(err) {
		return nil, err
	}
	normal.Mul(marks.T(), &weighted)
	if err := out.Solve(&normal, weighted.T()); err != nil && !isCondition(err) {
		return nil, fmt.Errorf("restoring %d lost rows: %w", len(lost), err)
	}
	out.Scale(-1, &out)
	return &out, nil
}

// independent returns a *SingularError where the columns of marks, those of the lost
// rows, are dependent.
func independent(marks *mat.Dense, lost []int) error {
	rank, involved := dependence(marks)
	if rank == len(lost) {
		return nil
	}
	e := &SingularError{Lost: len(lost), Rank: rank}
	for i, is := range involved {
		if is {
			e.Rows = append(e.Rows, lost[i])
		}
	}
	return e
}

// dependence is the rank of a matrix and which of its columns take part in a linear
// dependence.
func dependence(marks *mat.Dense) (rank int, involved []bool) {
	_, n := marks.Dims()
	involved = make([]bool, n)
	var svd mat.SVD
	if !svd.Factorize(marks, mat.SVDFullV) {
		for i := range involved {
			involved[i] = true
		}
		return 0, involved
	}
	values := svd.Values(nil)
	for _, s := range values {
		if s > negligible*values[0] {
			rank++
		}
	}
	var right mat.Dense
	svd.VTo(&right)
	for i := range n {
		for j := rank; j < n; j++ {
			if math.Abs(right.At(i, j)) > 1e-6 { // entries are 0 but for rounding, or not small
				involved[i] = true
			}
		}
	}
	return rank, involved
}

func (c *Checks) newReweighting(t, a, ag *mat.Dense, noise []float64, lost int) *Reweighting {
	v, g := c.code.v, len(c.columns)
	r := &Reweighting{T: t, ColumnGrowth: make([]float64, v), checks: c, weights: make([]float32, v*g)}
	var full mat.Dense // A + T Ag
	full.Mul(t, ag)
	full.Add(&full, a)
	dark, equal := c.isDark(), c.code.Design().ReadNoiseVariance()
	sum, plain := 0.0, 0.0
	for j := range v {
		for i := range g {
			r.weights[j*g+i] = float32(t.At(j, i))
		}
		if dark[j] {
			continue
		}
		mine, own, raw := full.RawRowView(j), 0.0, 0.0
		for k, n := range noise {
			own += mine[k] * mine[k] * n
			raw += a.At(j, k) * a.At(j, k) * n
		}
		r.ColumnGrowth[j] = own / equal
		sum, plain = sum+own, plain+raw
	}
	r.Growth = sum / equal / float64(max(1, v-g))
	r.Gain = plain / sum
	if lost > 0 {
		r.Gain = math.Inf(1)
	}
	r.scratch.New = func() any { return new([]float32) }
	return r
}

// Apply turns decoded = A y of a block of pixels, [code column][pixel], into A y + T r,
// in place. It allocates nothing once as many goroutines as work at a time have each
// made a call with the largest block. Safe for concurrent use.
func (r *Reweighting) Apply(decoded []float32, pixels, stride int) {
	c := r.checks
	c.check("Reweighting.Apply", len(decoded), c.code.v, pixels, stride)
	g := len(c.columns)
	buffer := r.scratch.Get().(*[]float32)
	defer r.scratch.Put(buffer)
	if len(*buffer) < g*pixels {
		*buffer = make([]float32, g*pixels)
	}
	for i, j := range c.columns {
		copy((*buffer)[i*pixels:(i+1)*pixels], decoded[j*stride:])
	}
	for j := range c.code.v {
		out := blas32.Vector{N: pixels, Inc: 1, Data: decoded[j*stride:]}
		for i := range g {
			if w := r.weights[j*g+i]; w != 0 {
				blas32.Axpy(w, blas32.Vector{N: pixels, Inc: 1, Data: (*buffer)[i*pixels:]}, out)
			}
		}
	}
}

// Erasure tells, before anything is read, whether the rows lost can be restored: the
// rank of their marks on the dark columns, and the growth of the lit columns' variance
// (+Inf where the rank is below the number of rows). Plan for a quarter of G.
func (c *Checks) Erasure(lost []int) (rank int, growth float64, err error) {
	sorted, err := sortedIndices("lost row", lost, c.code.v)
	if err != nil {
		return 0, 0, err
	}
	if len(sorted) == 0 {
		return 0, 1, nil
	}
	rank, _ = dependence(columnsOf(c.darkRows(), sorted))
	if rank < len(sorted) {
		return rank, math.Inf(1), nil
	}
	noise := make([]float64, c.code.v)
	for k := range noise {
		noise[k] = 1
	}
	for _, k := range sorted {
		noise[k] = math.Inf(1)
	}
	r, err := c.Reweight(noise)
	if err != nil {
		return rank, math.Inf(1), nil
	}
	return rank, r.Growth, nil
}

// inverse is A.
func (c *Code) inverse() *mat.Dense {
	all := make([]int, c.v)
	for j := range all {
		all[j] = j
	}
	return (&Checks{code: c, columns: all}).darkRows()
}

func (c *Checks) isDark() []bool {
	dark := make([]bool, c.code.v)
	for _, j := range c.columns {
		dark[j] = true
	}
	return dark
}

// columnsOf is a copy of some columns of a matrix.
func columnsOf(m *mat.Dense, columns []int) *mat.Dense {
	n, _ := m.Dims()
	out := mat.NewDense(n, len(columns), nil)
	for i := range n {
		for a, j := range columns {
			out.Set(i, a, m.At(i, j))
		}
	}
	return out
}

func identity(n int) *mat.Dense {
	out := mat.NewDense(n, n, nil)
	for i := range n {
		out.Set(i, i, 1)
	}
	return out
}
