package extract

import (
	"sort"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// A sample k in K of a pixel that was restored from the dark columns holds what the
// others make of it: with P the projector on the checks and u = A'g the weights of a
// sum's samples, it is the sum of the samples with the weights
//
//	u - P[:,K] Q u_K,   Q = P_KK^-1,
//
// which are 0 in K. For samples of one variance s^2 elements j and j' then have the
// covariance C_jj' + s^2 A_jK Q A_j'K', C that of samples that were all read, since the
// rows of A of lit columns are nearly orthogonal to the checks (to 1/v).

// erasure is the restored samples of a pixel.
type erasure struct {
	rows  []int
	q     *mat.Dense // Q
	trace float64    // of Q
}

// erasures tells of each pixel which samples were restored.
type erasures struct {
	projector *mat.SymDense
	lost      *erasure // of pixels without struck samples; nil without lost rows
	table     *product.Restored
}

// readErasures reads the table of restored samples and which code rows have no frame;
// nil where nothing was restored.
func (c *Cube) readErasures() error {
	table, err := product.ReadRestored(c.file)
	if err != nil {
		return err
	}
	var lost, dark []int
	for i, n := range c.noise.Frames {
		if n == 0 {
			lost = append(lost, i)
		}
		if c.noise.Element[i] < 0 {
			dark = append(dark, i)
		}
	}
	if len(dark) == 0 || len(lost)+len(table.X) == 0 {
		return nil
	}
	checks, err := hadamard.NewChecks(c.decoder.Code(), dark)
	if err != nil {
		return c.fault("%v", err)
	}
	for _, row := range table.CodeRow {
		if row < 0 || int(row) >= c.noise.V {
			return c.fault("table %s names code row %d of %d", product.RestoredTable, row, c.noise.V)
		}
	}
	c.erased = &erasures{projector: checks.Projector(), table: table}
	if len(lost) > 0 {
		c.erased.lost = c.erased.of(lost)
	}
	return nil
}

// of is the erasure of some rows; nil where they cannot be restored.
func (e *erasures) of(rows []int) *erasure {
	n := len(rows)
	inner := mat.NewSymDense(n, nil)
	for a, k := range rows {
		for b := a; b < n; b++ {
			inner.SetSym(a, b, e.projector.At(k, rows[b]))
		}
	}
	var factor mat.Cholesky
	if !factor.Factorize(inner) {
		return nil
	}
	var inverse mat.SymDense
	if err := factor.InverseTo(&inverse); err != nil {
		return nil
	}
	return &erasure{rows: rows, q: mat.DenseCopyOf(&inverse), trace: mat.Trace(&inverse)}
}

// row gives the erasures of pixels x0..x0+n-1 of a detector row; all nil for none.
func (e *erasures) row(y, x0, n int) []*erasure {
	out := make([]*erasure, n)
	if e == nil {
		return out
	}
	for x := range out {
		out[x] = e.lost
	}
	t := e.table
	from := sort.Search(len(t.Y), func(i int) bool { return int(t.Y[i]) > y || int(t.Y[i]) == y && int(t.X[i]) >= x0 })
	for from < len(t.Y) && int(t.Y[from]) == y && int(t.X[from]) < x0+n {
		x := t.X[from]
		var rows []int
		for ; from < len(t.Y) && int(t.Y[from]) == y && t.X[from] == x; from++ {
			rows = append(rows, int(t.CodeRow[from]))
		}
		if e.lost != nil {
			rows = append(rows, e.lost.rows...)
		}
		if one := e.of(rows); one != nil {
			out[int(x)-x0] = one
		}
	}
	return out
}

// marks are A_jK of the elements in given code columns, and A_jK Q.
func (e *erasure) marks(code *hadamard.Code, columns []int) (marks, weighted *mat.Dense) {
	open, closed := code.InverseEntries()
	marks, weighted = mat.NewDense(len(columns), len(e.rows), nil), new(mat.Dense)
	for i, j := range columns {
		for a, k := range e.rows {
			entry := closed
			if code.Bit(k, j) == 1 {
				entry = open
			}
			marks.Set(i, a, entry)
		}
	}
	weighted.Mul(marks, e.q)
	return marks, weighted
}

// spread is A_jK Q A_jK' of the elements in given code columns: what restoring adds to their
// variance, in units of a sample's.
func (e *erasure) spread(code *hadamard.Code, columns []int) []float64 {
	marks, weighted := e.marks(code, columns)
	out := make([]float64, len(columns))
	for i := range out {
		for a, m := range marks.RawRowView(i) {
			out[i] += m * weighted.At(i, a)
		}
	}
	return out
}

// couple adds to the covariances of pairs of elements, in given code columns, what
// restored samples of the variance white make of them; the diagonal has it already.
func (e *erasure) couple(dst [][]float64, code *hadamard.Code, columns []int, white float64) {
	marks, weighted := e.marks(code, columns)
	for i := range columns {
		left := weighted.RawRowView(i)
		for o := range i {
			sum := 0.0
			for a, m := range marks.RawRowView(o) {
				sum += left[a] * m
			}
			dst[i][o] += white * sum
			dst[o][i] += white * sum
		}
	}
}

// reweigh turns the weights u of a pixel's samples, every n-th of which is one code row's,
// into those of the samples that were read.
func (e *erasure) reweigh(p *mat.SymDense, u []float32, n int) {
	known := make([]float64, len(e.rows))
	for a := range known {
		for b, k := range e.rows {
			known[a] += e.q.At(a, b) * float64(u[k*n])
		}
	}
	v, _ := p.Dims()
	for k := range v {
		sum := 0.0
		for a, row := range e.rows {
			sum += p.At(k, row) * known[a]
		}
		u[k*n] -= float32(sum)
	}
}
