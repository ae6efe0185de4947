package reduce

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// priorLeak is how far the factor of the all-off frames is taken to be from 1 before it
// is measured: they have throughputs of their own, as science frames have.
const priorLeak = 0.1

// leakSums are what the factor of the all-off frames' light needs of a cycle. Corrected
// readings hold it in every frame alike: with u = P1, the mark of a pedestal on the
// checks, u'((1+e) y) = a off u'1, so that the mean dark decode vanishes for
//
//	a = sum_p w off u'((1+e) y) / (u'1 sum_p w (off^2 - var off)).
type leakSums struct {
	mark   *mat.VecDense // u
	off    []float64     // sum_p w off y_k
	square float64       // sum_p w (off^2 - var)
	noise  float64       // sum_p w off^2: what readings of weight w make of it
	own    float64       // sum_p w^2 off^2 var
}

// newLeakSums takes the checks that see a pedestal, blind to rows that were lost.
func newLeakSums(checks *hadamard.Checks) *leakSums {
	v := checks.Code().V()
	ones := mat.NewVecDense(v, nil)
	for k := range v {
		ones.SetVec(k, 1)
	}
	l := &leakSums{mark: mat.NewVecDense(v, nil), off: make([]float64, v)}
	l.mark.MulVec(checks.Projector(), ones)
	return l
}

// add takes a block of a cycle, [code row][pixel].
func (l *leakSums) add(b *cycleBlock, s *sample) {
	n, v := len(s.pixels), len(l.off)
	weight := make([]float64, n)
	for k := range v {
		for p, x := range b.s2[k*n : (k+1)*n] {
			weight[p] += float64(x) / float64(v)
		}
		for p, y := range b.y[k*n : (k+1)*n] {
			weight[p] += float64(y - y) // NaN for a pixel that was dropped
		}
	}
	for p, variance := range weight {
		weight[p] = 0
		if variance > 0 {
			w, off, own := 1/variance, float64(s.off[p]), float64(s.offVariance[p])
			weight[p] = w * off
			l.square += w * (off*off - own)
			l.noise += w * off * off
			l.own += w * w * off * off * own
		}
	}
	for k := range v {
		for p, y := range b.y[k*n : (k+1)*n] {
			if weight[p] != 0 {
				l.off[k] += weight[p] * float64(y)
			}
		}
	}
}

// leakFactor is a of all cycles together with its error; nil where the all-off frames
// hold too little light to tell. An error of the throughputs makes one of a: the light of
// the field, so much more than that of the leak, does not cancel then.
func (d *darkFit) leakFactor(b *belief) *product.Measured {
	var above, below, variance float64
	byFrame := mat.NewVecDense(len(b.mean), nil) // what an error of 1+e makes of the sum
	for i, c := range d.cycles {
		l := d.sums[i].leak
		for row, k := range c.frame {
			if k >= 0 {
				part := l.mark.AtVec(row) * l.off[row]
				byFrame.SetVec(k, part)
				above += part * (1 + b.mean[k])
			}
		}
		mark := mat.Sum(l.mark)
		below += mark * l.square
		variance += mat.Dot(l.mark, l.mark)*l.noise + mark*mark*l.own
	}
	if below <= 0 {
		return nil
	}
	variance += mat.Inner(byFrame, b.covariance, byFrame)
	a, sigma := above/below, math.Sqrt(variance)/below
	if !(sigma < priorLeak) {
		return nil
	}
	return &product.Measured{Value: a, Error: sigma}
}

// applyLeak puts the factor into the correction, drawn to 1 by what is known before.
func (r *reduction) applyLeak(t *throughput) {
	if t.dark == nil || len(r.roles.calibration.off) == 0 {
		return
	}
	t.report.Leak = t.dark.leakFactor(t.belief)
	if m := t.report.Leak; m != nil {
		known := priorLeak * priorLeak / (priorLeak*priorLeak + m.Error*m.Error)
		r.correction.leak = 1 + known*(m.Value-1)
	}
}
