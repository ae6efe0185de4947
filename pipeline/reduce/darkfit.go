package reduce

import (
	"context"
	"math"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
)

// darkFit measures the throughput of a night from its dark columns, cycle by cycle.
// It adds up the sample first and fits then.
type darkFit struct {
	checks  *hadamard.Checks // of a whole cycle
	cycles  []*cycle
	sums    []cycleSums
	excess  float64 // of photon noise
	workers int
	struck  int
	// neighbour takes the light of open neighbours out of a block; nil for nothing.
	neighbour func(y []float32, pixels []place, stride int, lost []int)
	// terms, where not nil, are taken out of the sample; base are the factors that the
	// readings of frames are multiplied by to make the terms' light.
	terms  *terms
	base   []float64
	frames []*exposure.Frame
}

// cycleSums is what is kept of the sample in a cycle.
type cycleSums struct {
	checks *hadamard.Checks // blind to the rows that are lost
	gram   *hadamard.Gram
	leak   *leakSums
	// light is the sum of each row over the pixels that are good in all cycles.
	light []float64
}

// newDarkFit makes a fit without readings. Throughput is measured by checks blind to a
// pedestal, which the leak is.
func newDarkFit(checks *hadamard.Checks, cycles []*cycle, excess float64, workers int) (*darkFit, error) {
	d := &darkFit{checks: checks, cycles: cycles, sums: make([]cycleSums, len(cycles)), excess: excess, workers: workers}
	v := checks.Code().V()
	for i, c := range cycles {
		all, err := checks.WithoutRows(c.lost())
		if err != nil {
			return nil, err
		}
		d.sums[i] = cycleSums{checks: all.WithoutPedestal(), gram: hadamard.NewGram(v), leak: newLeakSums(all), light: make([]float64, v)}
	}
	return d, nil
}

// cycleBlock is a chunk of the sample in a cycle.
type cycleBlock struct {
	y, s2 []float32 // [code row][pixel]
}

// add takes a chunk of the sample.
func (d *darkFit) add(ctx context.Context, s *sample) error {
	n := len(s.pixels)
	if n == 0 {
		return ctx.Err()
	}
	blocks := make([]cycleBlock, len(d.cycles))
	for i, c := range d.cycles {
		b := &blocks[i]
		b.y, b.s2 = s.block(c, d.excess)
		if err := d.addGram(ctx, &d.sums[i], b, s.pixels, c); err != nil {
			return err
		}
		d.sums[i].leak.add(b, s)
	}
	if len(d.cycles) > 1 {
		d.addLight(blocks, n)
	}
	return nil
}

// The pixels of a chunk are added in so many parts, each by one worker, so that workers
// do not change the order of additions; gramBytes bounds the memory of the parts' sums.
const (
	gramParts = 8
	gramBytes = 64 << 20
)

// addGram corrects the pixels of a block, drops those that were struck, and adds the
// others up.
func (d *darkFit) addGram(ctx context.Context, sums *cycleSums, b *cycleBlock, pixels []place, c *cycle) error {
	n, v := len(pixels), d.checks.Code().V()
	most := max(1, min(gramParts, gramBytes/(8*v*v)))
	size := max(struckChunk, (n+most-1)/most)
	parts := make([]*hadamard.Gram, (n+size-1)/size)
	struck := make([]int, len(parts))
	basis := sums.checks.Basis()
	err := parallel.Do(ctx, d.workers, len(parts), func(_, i int) error {
		from, to := i*size, min((i+1)*size, n)
		if d.neighbour != nil {
			d.neighbour(b.y[from:], pixels[from:to], n, c.lost())
		}
		d.freeOfTerms(b.y[from:], pixels[from:to], n, c)
		if basis != nil {
			struck[i] = dropStruck(b.y[from:], b.s2[from:], to-from, n, basis)
		}
		parts[i] = hadamard.NewGram(v)
		parts[i].Add(b.y[from:], b.s2[from:], to-from, n, 0)
		return nil
	})
	if err != nil {
		return err
	}
	for i, p := range parts {
		sums.gram.Merge(p)
		d.struck += struck[i]
	}
	return nil
}

// addLight adds up the rows over the pixels that are good in all cycles.
func (d *darkFit) addLight(blocks []cycleBlock, n int) {
	for p := range n {
		sum := float32(0) // NaN once a sample is
		for i := range blocks {
			for row := range d.checks.Code().V() {
				sum += blocks[i].y[row*n+p]
			}
		}
		if sum != sum {
			continue
		}
		for i := range blocks {
			for row := range d.sums[i].light {
				d.sums[i].light[row] += float64(blocks[i].y[row*n+p])
			}
		}
	}
}

// darkResult is what the dark columns say of all cycles together.
type darkResult struct {
	belief     *belief // of all frames of the sample, after the fit
	heldOut    hadamard.HeldOut
	kept       bool // the held-out chi-square falls
	directions float64
	pixels     int
}

// uneasy tells whether the dark columns stand away from zero beyond what chance gives
// once in a million.
func (r *darkResult) uneasy() bool {
	return r.heldOut.Before-r.heldOut.ExpectedBefore > 5*r.heldOut.SD
}

// fit takes what is believed before and gives what is believed after. Cycles are
// measured each by itself, and brought to one level by the light of the sample.
func (d *darkFit) fit(before *belief) (*darkResult, error) {
	n := len(before.mean)
	r := &darkResult{belief: &belief{mean: make([]float64, n), covariance: mat.NewSymDense(n, nil), scatter: before.scatter}}
	for i, c := range d.cycles {
		factor, prior := before.ofCycle(c)
		fit, err := d.sums[i].checks.Throughput(d.sums[i].gram.Scaled(factor), prior)
		if err != nil {
			return nil, err
		}
		r.add(c, factor, fit)
		r.pixels += d.sums[i].gram.Pixels
	}
	r.kept = r.heldOut.Falls()
	d.level(r.belief)
	return r, nil
}

// ofCycle gives the factors 1+e believed of a cycle's rows, and the covariance of
// e's error relative to them; a row without a frame is as any other.
func (b *belief) ofCycle(c *cycle) (factor []float64, prior *mat.SymDense) {
	v := len(c.frame)
	factor, prior = make([]float64, v), mat.NewSymDense(v, nil)
	for i, k := range c.frame {
		factor[i] = 1
		if k >= 0 {
			factor[i] = 1 + b.mean[k]
		}
	}
	for i, k := range c.frame {
		for j := i; j < v; j++ {
			switch m := c.frame[j]; {
			case k >= 0 && m >= 0:
				prior.SetSym(i, j, b.covariance.At(k, m)/(factor[i]*factor[j]))
			case i == j:
				prior.SetSym(i, j, b.scatter*b.scatter)
			}
		}
	}
	return factor, prior
}

// add puts a cycle's fit into the result: factors multiply.
func (r *darkResult) add(c *cycle, factor []float64, fit *hadamard.ThroughputFit) {
	for i, k := range c.frame {
		if k < 0 {
			continue
		}
		r.belief.mean[k] = factor[i]*(1+fit.E[i]) - 1
		for j := i; j < len(c.frame); j++ {
			if m := c.frame[j]; m >= 0 {
				r.belief.covariance.SetSym(k, m, factor[i]*factor[j]*fit.Posterior.At(i, j))
			}
		}
	}
	h := fit.HeldOut
	r.heldOut.Before += h.Before
	r.heldOut.ExpectedBefore += h.ExpectedBefore
	r.heldOut.After += h.After
	r.heldOut.ExpectedAfter += h.ExpectedAfter
	r.heldOut.SD = math.Hypot(r.heldOut.SD, h.SD)
	r.directions += fit.Directions
}

// level scales each cycle's factors so that the sample's light, summed over the rows
// and pixels that all cycles have, is the same in all: a set of frames of one scene
// holds the same light, and no dark column sees the level of a whole cycle.
func (d *darkFit) level(b *belief) {
	if len(d.cycles) < 2 {
		return
	}
	light := make([]float64, len(d.cycles))
	total := 0.0
	for i, c := range d.cycles {
		for row, k := range c.frame {
			if d.everywhere(row) {
				light[i] += (1 + b.mean[k]) * d.sums[i].light[row]
			}
		}
		if light[i] <= 0 {
			return
		}
		total += light[i] / float64(len(light))
	}
	for i, c := range d.cycles {
		for _, k := range c.frame {
			if k >= 0 {
				b.mean[k] = (1+b.mean[k])*total/light[i] - 1
			}
		}
	}
}

// everywhere tells whether a row has a frame in all cycles.
func (d *darkFit) everywhere(row int) bool {
	for _, c := range d.cycles {
		if c.frame[row] < 0 {
			return false
		}
	}
	return true
}
