package hadamard

import (
	"fmt"

	"gonum.org/v1/gonum/mat"
)

// Predictors is the v x v matrix R whose product R y predicts every row from the rows
// that are not lost: the projection on what lit columns can show, by least squares over
// the rows at hand (a pedestal apart, where c is WithoutPedestal), R = I - E_K P_KK^-1 P_K - P' with P' the projector WithoutRows(K). The
// rows K of R restore the lost ones and do not look at their readings; any other row is
// its own reading less the part of its noise that the checks see.
//
// Errors: rows out of range or named twice; *SingularError where the lost rows cannot be
// told apart.
func (c *Checks) Predictors(lost []int) (*mat.Dense, error) {
	v := c.code.v
	less, err := c.WithoutRows(lost)
	if err != nil {
		return nil, err
	}
	r := identity(v)
	r.Sub(r, less.projector)
	rows := less.lost
	if len(rows) == 0 {
		return r, nil
	}
	whole := newChecks(c.code, c.columns) // earlier lost rows are predicted too
	if c.pedestal {
		whole = whole.WithoutPedestal()
	}
	if whole.basis == nil {
		return nil, &SingularError{Rows: rows, Lost: len(rows)}
	}
	if err := independent(columnsOf(whole.basis, rows), rows); err != nil {
		return nil, err
	}
	own, all := mat.NewDense(len(rows), len(rows), nil), mat.NewDense(len(rows), v, nil)
	for a, i := range rows {
		for b, j := range rows {
			own.Set(a, b, whole.projector.At(i, j))
		}
		for j := range v {
			all.Set(a, j, whole.projector.At(i, j))
		}
	}
	var missing mat.Dense
	if err := missing.Solve(own, all); err != nil && !isCondition(err) {
		return nil, fmt.Errorf("predicting %d lost rows: %w", len(rows), err)
	}
	for a, i := range rows {
		for j := range v {
			r.Set(i, j, r.At(i, j)-missing.At(a, j))
		}
		for _, j := range rows { // zero but for rounding
			r.Set(i, j, 0)
		}
	}
	return r, nil
}

// Inverted turns Predictors of rows into those of the inverted masks: mirrors that the
// row opens closed and the others open, sum_m R_m y/k - R_i y.
func (c *Checks) Inverted(r *mat.Dense) *mat.Dense {
	v := c.code.v
	total := make([]float64, v)
	for m := range v {
		for j, x := range r.RawRowView(m) {
			total[j] += x / float64(c.code.k)
		}
	}
	out := mat.NewDense(v, v, nil)
	for m := range v {
		for j, x := range r.RawRowView(m) {
			out.Set(m, j, total[j]-x)
		}
	}
	return out
}

// Comparison holds frames against what rows should show: entry (i, m) is about frame i
// (the readings labelled i) and prediction m.
type Comparison struct {
	// Distance is sum_p (y_i - a R_m y)^2/s^2, Expected what noise alone gives of it where
	// the two are the same, Scale the factor a.
	Distance, Expected, Scale *mat.Dense
}

// Compare compares all frames with all predictions r (v x v, as Predictors gives them).
// With free set, the factor a of each pair is that of the least distance, noise taken
// into account, so that throughput does not matter; else it is 1.
//
// Frame i's own noise is part of R_m y wherever R looks at it: compare frames that are
// among the lost rows of r.
func (g *Gram) Compare(r *mat.Dense, free bool) *Comparison {
	v := g.V()
	if n, m := r.Dims(); n != v || m != v {
		panic(fmt.Sprintf("internal error: hadamard: predictors %d x %d for a Gram of %d rows", n, m, v))
	}
	noise := g.NoiseCovariance()
	cross, crossNoise := new(mat.Dense), new(mat.Dense)
	cross.Mul(r, mat.DenseCopyOf(g.sum))
	crossNoise.Mul(r, mat.DenseCopyOf(noise))
	out := &Comparison{mat.NewDense(v, v, nil), mat.NewDense(v, v, nil), mat.NewDense(v, v, nil)}
	for m := range v {
		norm, normNoise := 0.0, 0.0
		for j, x := range r.RawRowView(m) {
			norm += float64(cross.At(m, j) * x)
			normNoise += float64(crossNoise.At(m, j) * x)
		}
		for i := range v {
			x, n, a := cross.At(m, i), crossNoise.At(m, i), 1.0
			if free && norm > normNoise {
				a = (x - n) / (norm - normNoise)
			}
			out.Scale.Set(i, m, a)
			out.Distance.Set(i, m, g.sum.At(i, i)-2*a*x+a*a*norm)
			out.Expected.Set(i, m, noise.At(i, i)-2*a*n+a*a*normNoise)
		}
	}
	return out
}

// Distance is the distance of frame i from the prediction vector'y, and what noise alone
// gives of it: (e_i - vector)' G (e_i - vector), and the same of the noise.
func (g *Gram) Distance(i int, vector []float64) (distance, expected float64) {
	difference := make([]float64, g.V())
	for k, x := range vector {
		difference[k] = -x
	}
	difference[i]++
	d := mat.NewVecDense(len(difference), difference)
	if g.covariance != nil {
		return mat.Inner(d, g.sum, d), mat.Inner(d, g.covariance, d)
	}
	for k, x := range difference {
		expected += x * x * g.noise[k]
	}
	return mat.Inner(d, g.sum, d), expected
}
