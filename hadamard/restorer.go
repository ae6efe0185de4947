package hadamard

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"
)

// Restorer finds what readings lack by the marks that this leaves on the dark columns.
// Let the readings of rows K of a pixel be anything, y = Wf + noise elsewhere. With M
// the columns K of Ag and X the inverse of Ag Ag' on the checks,
//
//	e = -(M'X M)^-1 M'X r,   r = Ag y
//
// is the least-squares estimate of what is to be added to y_K, and its covariance, for
// readings of unit variance, is P_KK^-1 - I. It does not depend on what stood in y_K.
// A Restorer of checks WithoutPedestal is blind to a constant in all readings. It
// never changes and is safe for concurrent use.
type Restorer struct {
	code    *Code
	columns []int
	marks   *mat.Dense // Ag'X, v x g
	p       *mat.SymDense
	blind   bool // to a pedestal
}

// NewRestorer prepares a restorer on the checks c.
func (c *Checks) NewRestorer() *Restorer {
	r := &Restorer{code: c.code, columns: c.Columns(), marks: mat.NewDense(c.code.v, max(1, len(c.columns)), nil), p: c.Projector(), blind: c.pedestal}
	if c.G() > 0 {
		r.marks.Mul(c.darkRows().T(), c.inverse)
	}
	return r
}

// Columns are the dark columns, in the order in which residuals are given.
func (r *Restorer) Columns() []int { return r.columns }

// Repair is the memory of Solve, and its result.
type Repair struct {
	// Missing is e: what is to be added to the readings of the rows.
	Missing []float64
	// Growth is 1 + tr(P_KK^-1)/v: the mean variance of the lit columns over what they
	// have with all rows, for readings of equal noise; to 1/v of the excess.
	Growth float64
	factor []float64
}

// smallestPivot: where a pivot of P_KK, whose entries are at most 1 and the diagonal ones
// near g/v, falls so low, the marks of the rows are dependent but for rounding.
const smallestPivot = 1e-9

// Solve fills in the repair for the given rows of a pixel with residual r, dark decodes
// in the order of Columns. It is false where the rows' marks are dependent, so that
// nothing can be restored; nothing is allocated once a Repair has seen as many rows.
func (r *Restorer) Solve(out *Repair, rows []int, residual []float64) bool {
	n := len(rows)
	if cap(out.factor) < n*n || cap(out.Missing) < n {
		out.factor, out.Missing = make([]float64, n*n), make([]float64, n)
	}
	out.factor, out.Missing = out.factor[:n*n], out.Missing[:n]
	if !r.factorise(out.factor, rows) {
		return false
	}
	for a, k := range rows {
		sum := 0.0
		for d, m := range r.marks.RawRowView(k)[:len(residual)] {
			sum -= m * residual[d]
		}
		out.Missing[a] = sum
	}
	solveLower(out.factor, out.Missing)
	solveUpper(out.factor, out.Missing)
	out.Growth = 1 + inverseTrace(out.factor, n)/float64(r.code.v)
	return true
}

// Spread puts into dst, by code column, the variance that the restored readings of the
// last Solve, of the same rows, add to a lit column's decode: A_jK P_KK^-1 A_jK', in units
// of the variance of a reading, to rows/v of the whole; 0 for dark columns. Columns of an S-matrix
// all get the same of a single row, those of a sparse code much more where they are open in
// it.
func (r *Restorer) Spread(dst []float64, rows []int, solved *Repair) {
	r.spread(dst, rows, solved.factor)
}

func (r *Restorer) spread(dst []float64, rows []int, factor []float64) {
	open, closed := r.code.InverseEntries()
	var buffer [maxColumn]float64
	x := buffer[:min(len(rows), maxColumn)]
	if len(rows) > maxColumn {
		x = make([]float64, len(rows))
	}
	for j := range dst[:r.code.v] {
		for a, k := range rows {
			x[a] = closed
			if r.code.Bit(k, j) == 1 {
				x[a] = open
			}
		}
		solveLower(factor, x)
		dst[j] = dot(x, x)
	}
	for _, j := range r.columns {
		dst[j] = 0
	}
}

// Project puts P y into dst, one value a code row, for a pixel's residual r = Ag y, dark
// decodes in the order of Columns: each row's part in what the dark columns show.
func (r *Restorer) Project(dst, residual []float64) {
	for k := range dst[:r.code.v] {
		sum := 0.0
		for d, m := range r.marks.RawRowView(k)[:len(residual)] {
			sum += m * residual[d]
		}
		dst[k] = sum
	}
}

// factorise puts the lower Cholesky factor of P_KK into l, row by row.
func (r *Restorer) factorise(l []float64, rows []int) bool {
	n := len(rows)
	for a := range n {
		for b := 0; b <= a; b++ {
			sum := r.p.At(rows[a], rows[b])
			for c := range b {
				sum -= l[a*n+c] * l[b*n+c]
			}
			if a > b {
				l[a*n+b] = sum / l[b*n+b]
				continue
			}
			if !(sum > smallestPivot) {
				return false
			}
			l[a*n+a] = math.Sqrt(sum)
		}
	}
	return true
}

// solveLower solves Lx = b in place, solveUpper L'x = b; l as from factorise.
func solveLower(l, x []float64) {
	n := len(x)
	for a := range n {
		for b := range a {
			x[a] -= l[a*n+b] * x[b]
		}
		x[a] /= l[a*n+a]
	}
}

func solveUpper(l, x []float64) {
	n := len(x)
	for a := n - 1; a >= 0; a-- {
		for b := a + 1; b < n; b++ {
			x[a] -= l[b*n+a] * x[b]
		}
		x[a] /= l[a*n+a]
	}
}

// inverseTrace is the trace of (LL')^-1: the sum of squares of L^-1, column by column.
func inverseTrace(l []float64, n int) float64 {
	trace := 0.0
	for c := range n {
		var column [maxColumn]float64
		x := column[:0]
		if n > maxColumn {
			x = make([]float64, 0, n)
		}
		for a := c; a < n; a++ {
			v := 0.0
			if a == c {
				v = 1
			}
			for b := c; b < a; b++ {
				v -= l[a*n+b] * x[b-c]
			}
			v /= l[a*n+a]
			x = append(x, v)
			trace += v * v
		}
	}
	return trace
}

// maxColumn rows are restored without a buffer on the heap: a quarter of the largest
// code's default redundancy.
const maxColumn = 128

// LostRows restores the same rows in every pixel.
type LostRows struct {
	// Rows are the lost ones.
	Rows []int
	// Growth is the mean variance of the lit columns over what they would have were all
	// rows as noisy as the mean of those at hand; its root is the growth of the noise.
	Growth float64
	// Ratio is, by code column, the variance over that of a plain decode in which the
	// lost rows have none; 1 for dark columns.
	Ratio []float64
	// DarkShare is the expected sum of squared dark decodes, restored and, without
	// pedestal, less their mean, over g times the mean variance of the lit columns: near
	// (g - rows)/g.
	DarkShare float64
	// Spread is, by code column, what Restorer.Spread is.
	Spread []float64

	code    *Code
	columns []int
	weights []float32 // e = weights r, [row][dark column]
}

// Lost prepares to restore rows, sorted, none of them twice, where the other rows have
// the given relative noise variances. Without rows, all is as it would be were nothing
// restored. The error tells that the rows' marks are dependent.
func (r *Restorer) Lost(rows []int, noise []float64) (*LostRows, error) {
	n, g, v := len(rows), len(r.columns), r.code.v
	l := make([]float64, n*n)
	if !r.factorise(l, rows) {
		return nil, fmt.Errorf("%d lost code rows leave dependent marks on the %d dark columns", n, g)
	}
	out := &LostRows{Rows: rows, code: r.code, columns: r.columns, weights: make([]float32, n*g), Spread: make([]float64, v)}
	r.spread(out.Spread, rows, l)
	weights := mat.NewDense(max(1, n), g, nil) // one row of zeros where none is lost
	column := make([]float64, n)
	for d := range g {
		for a, k := range rows {
			column[a] = -r.marks.At(k, d)
		}
		solveLower(l, column)
		solveUpper(l, column)
		for a, x := range column {
			weights.Set(a, d, x)
			out.weights[a*g+d] = float32(x)
		}
	}
	out.foresee(r, weights, noise, v-n)
	return out, nil
}

// foresee fills in what noise becomes: the rows of A + A_K e Ag, without columns K, give
// each column's variance.
func (o *LostRows) foresee(r *Restorer, weights *mat.Dense, noise []float64, there int) {
	v, g := r.code.v, len(r.columns)
	a := (&Checks{code: r.code, columns: allColumns(v)}).darkRows()
	gain := mat.NewDense(max(1, len(o.Rows)), v, nil)
	gain.Mul(weights, (&Checks{code: r.code, columns: r.columns}).darkRows())
	known := make([]bool, v)
	total := 0.0
	for i := range known {
		known[i] = true
	}
	for _, k := range o.Rows {
		known[k] = false
	}
	for i, is := range known {
		if is {
			total += noise[i]
		}
	}
	lit := make([]bool, v)
	for i := range lit {
		lit[i] = true
	}
	for _, d := range r.columns {
		lit[d] = false
	}
	restored := func(j int) []float64 {
		row := append([]float64(nil), a.RawRowView(j)...)
		for b, k := range o.Rows {
			for i := range row {
				row[i] += a.At(j, k) * gain.At(b, i)
			}
		}
		return row
	}
	o.Ratio = make([]float64, v)
	mean, complete := 0.0, 0.0
	for j := range v {
		o.Ratio[j] = 1
		if !lit[j] {
			continue
		}
		plain, own := 0.0, 0.0
		for i, x := range restored(j) {
			if known[i] {
				plain += a.At(j, i) * a.At(j, i) * noise[i]
				own += x * x * noise[i]
			}
			complete += a.At(j, i) * a.At(j, i) * total / float64(there)
		}
		o.Ratio[j] = own / plain
		mean += own
	}
	o.Growth = mean / complete
	o.DarkShare = darkSquare(r, restored, known, noise) / (float64(g) * mean / float64(max(1, v-g)))
}

// darkSquare is the expected sum of squared dark decodes; less their mean where the
// restorer's checks are blind to a pedestal.
func darkSquare(r *Restorer, restored func(j int) []float64, known []bool, noise []float64) float64 {
	g := len(r.columns)
	rows, mean := make([][]float64, g), make([]float64, r.code.v)
	for d, j := range r.columns {
		rows[d] = restored(j)
		for i, x := range rows[d] {
			mean[i] += x / float64(g)
		}
	}
	sum := 0.0
	for _, row := range rows {
		for i, x := range row {
			if r.blind {
				x -= mean[i]
			}
			if known[i] {
				sum += x * x * noise[i]
			}
		}
	}
	return sum
}

func allColumns(v int) []int {
	all := make([]int, v)
	for j := range all {
		all[j] = j
	}
	return all
}

// Apply restores a decoded block, [code column][pixel], in place. missing is memory of
// len(Rows) x pixels and receives what was added to the readings, [row][pixel].
func (o *LostRows) Apply(decoded, missing []float32, pixels, stride int) {
	o.Missing(missing, decoded, pixels, stride)
	AddReadings(o.code, decoded, o.Rows, missing, pixels, stride)
}

// Missing puts into missing what a decoded block's readings of the rows lack.
func (o *LostRows) Missing(missing, decoded []float32, pixels, stride int) {
	g := len(o.columns)
	for a := range o.Rows {
		dst := missing[a*pixels : (a+1)*pixels]
		clear(dst)
		for d, j := range o.columns {
			addTimes(dst, decoded[j*stride:j*stride+pixels], o.weights[a*g+d])
		}
	}
}

// AddReadings adds to a decoded block, [code column][pixel], what the code makes of
// extra in some rows' readings, [row][pixel].
func AddReadings(c *Code, decoded []float32, rows []int, extra []float32, pixels, stride int) {
	open, closed := c.InverseEntries()
	for j := range c.v {
		dst := decoded[j*stride : j*stride+pixels]
		for a, k := range rows {
			entry := closed
			if c.Bit(k, j) == 1 {
				entry = open
			}
			addTimes(dst, extra[a*pixels:(a+1)*pixels], float32(entry))
		}
	}
}

func addTimes(dst, src []float32, factor float32) {
	for p, x := range src[:len(dst)] {
		dst[p] += factor * x
	}
}
