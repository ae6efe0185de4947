package reduce

import "gonum.org/v1/gonum/mat"

// Scatters and spans of trends that a night may have, the widest first.
var (
	typicalScatters = []float64{priorScatter, 0.02, 0.008, 0.003}
	typicalTrends   = []float64{priorTrend, 0.05}
)

// typical is what frames of such times are taken to do, before each is measured: of some
// scatters and trends the one under which what the dark columns of all cycles say is
// likeliest. One that is too wide would answer with noise where the scene tells little.
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
	best := 0
	for m, x := range likely {
		if x > likely[best] {
			best = m
		}
	}
	return all[best], nil
}
