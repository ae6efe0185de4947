package hadamard

import (
	"fmt"

	"gonum.org/v1/gonum/mat"
)

// Evidence is, for each prior covariance of E, the logarithm of the likelihood of what the
// dark columns say under it, less what all priors have in common: the night's own scatter
// is the one with the most ("type II maximum likelihood"; MacKay 1992, Neural Computation
// 4, 415). With H and V as Throughput has them, -H1 is Gaussian of covariance H S H + V. A
// prior that is wide for the night answers patterns that the scene hardly measures with
// noise.
//
// Errors: as Throughput.
func (c *Checks) Evidence(g *Gram, priors []*mat.SymDense) ([]float64, error) {
	for _, s := range priors {
		if err := c.checkFit(g, s); err != nil {
			return nil, err
		}
	}
	eq := c.equations(g.lightSums())
	out := make([]float64, len(priors))
	active := eq.active()
	if len(active) == 0 {
		return out, nil
	}
	h, noise := selected(eq.measured(), active, active), selected(eq.v, active, active)
	d := mat.NewVecDense(len(active), nil)
	for a, i := range active {
		d.SetVec(a, eq.d[i])
	}
	for m, s := range priors {
		var total mat.Dense
		total.Product(h, selected(s, active, active), h)
		total.Add(&total, noise)
		factor, err := factorised(symmetric(&total))
		if err != nil {
			return nil, fmt.Errorf("throughput: %w", err)
		}
		var x mat.VecDense
		if err := factor.SolveVecTo(&x, d); err != nil && !isCondition(err) {
			return nil, err
		}
		out[m] = -(mat.Dot(d, &x) + factor.LogDet()) / 2
	}
	return out, nil
}
