package reduce

import (
	"errors"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// Scatters and spans of trends that a night may have, the widest first.
var (
	typicalScatters = []float64{priorScatter, 0.02, 0.008, 0.003}
	typicalTrends   = []float64{priorTrend, 0.05}
)

// decisive is by how much the logarithm of one's likelihood must exceed a wider one's, odds of
// 150: a scene that tells nothing leaves the widest.
const decisive = 5

// typical is what frames of such times are taken to do, before each is measured: of some
// scatters and trends the widest that is about as likely as any, by what the dark columns of
// all cycles say. One that is too wide would answer with noise where the scene tells little.
func (d *darkFit) typical(times []float64) (*belief, error) {
	var all []*belief
	for _, scatter := range typicalScatters {
		for _, trend := range typicalTrends {
			all = append(all, newBeliefOf(times, scatter, trend))
		}
	}
	likely := make([]float64, len(all))
	for i, c := range d.cycles {
		priors := make([]*mat.SymDense, len(all))
		for m, b := range all {
			_, priors[m] = b.ofCycle(c)
		}
		evidence, err := d.sums[i].checks.Evidence(d.sums[i].gram, priors)
		if err != nil {
			return nil, err
		}
		for m, x := range evidence {
			likely[m] += x
		}
	}
	most := slices.Max(likely)
	for m, x := range likely {
		if x >= most-decisive {
			return all[m], nil
		}
	}
	return nil, errors.New("internal error: no scatter is likely")
}
