package reduce

import (
	"errors"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
)

// typical is what frames of such times are taken to do, before each is measured: of some
// scatters and trends the widest that is about as likely as any, by what the dark columns of
// all cycles say.
func (d *darkFit) typical(times []float64) (*belief, error) {
	var all []*belief
	for _, night := range hadamard.TypicalNights() {
		all = append(all, newBeliefOf(times, night.Scatter, night.Trend))
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
	m := hadamard.WidestLikely(likely)
	if m < 0 {
		return nil, errors.New("internal error: no scatter is likely")
	}
	return all[m], nil
}
