package plan

import (
	"context"
	"fmt"
	"math"
	"slices"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/trade"
)

const (
	// What is thought of the transmission before the night: reduce's own defaults.
	priorScatter, priorTrend = 0.05, 0.30
	// leastHeld is how much of what an element with the star in its middle would hold the
	// star's element is to hold: below, a star that moves looks like one that fades.
	leastHeld = 0.75
	// moveCost is by how much the error of a frame's transmission grows because reduce fits
	// the image's moves besides: 1.3 and 1.7 in two rehearsed nights (reduce's
	// TestNightOfPickedSentinels).
	moveCost = 1.5
	// leastPart: a measurement that leaves more than half of what is thought beforehand is none.
	leastPart = 0.5
)

// sentinels chooses rows on stars that measure each frame's transmission better than the dark
// columns would, the best first.
func (p *picking) sentinels(ctx context.Context, most int) error {
	stars, err := p.watchable(p.stars())
	if err != nil {
		return err
	}
	if len(stars.good) == 0 {
		p.warn("no sentinel rows are planned: %s; list sentinel_rows on bright sky, or measure the transmission by a monitor", stars.why)
		return nil
	}
	dark, err := p.darkError(ctx)
	if err != nil {
		return err
	}
	for _, a := range stars.good {
		own := moveCost / a.SNR
		if own >= dark {
			if len(p.picked) == 0 {
				p.warn("no sentinel rows are planned: the dark columns measure a frame's transmission to %.2g %% already, and rows on the best star, source %d, would to %.2g %%; leave from_sources.sentinels out", 100*dark, a.Source, 100*own)
			}
			return nil
		}
		if len(p.picked) == most {
			return nil
		}
		if p.meets(a) {
			continue
		}
		p.target.SentinelRows = append(slices.Clone(p.target.SentinelRows), sequence.SentinelRow{First: a.First, Last: a.Last, Element: a.Element})
		p.picked = append(p.picked, PickedRows{
			Use: sequence.UseSentinel, Source: a.Source, First: a.First, Last: a.Last, Elements: [2]int{a.Element, a.Element},
			Why: fmt.Sprintf("its S/N of %.0f measures a frame's transmission to %.2g %%, dark columns alone to %.2g %%; the element holds %.0f %% of its light and the brightest pixel is %.0f %% full", a.SNR, 100*own, 100*dark, 100*a.Held, 100*a.Full),
		})
	}
	return nil
}

// watched are stars for sentinel rows, the best first, and why there are not more.
type watched struct {
	good []forecast.Alone
	why  string
}

// watchable looks at all stars. The reason is that of the brightest one that will not do.
func (p *picking) watchable(stars []int) (*watched, error) {
	w := &watched{why: "the forecast has no star that no measurement is about"}
	brightest := -1.0
	for _, source := range stars {
		a, err := p.light.Alone(p.candidate, source)
		if err != nil {
			return nil, err
		}
		if why := unfit(a); why == "" {
			w.good = append(w.good, a)
		} else if a.SNR > brightest {
			brightest, w.why = a.SNR, fmt.Sprintf("source %d %s", source, why)
		}
	}
	slices.SortStableFunc(w.good, func(a, b forecast.Alone) int {
		switch {
		case a.SNR > b.SNR:
			return -1
		case a.SNR < b.SNR:
			return 1
		}
		return 0
	})
	return w, nil
}

// unfit says why a star will not do for sentinel rows; "" for one that does.
func unfit(a forecast.Alone) string {
	switch {
	case a.Element < 0:
		return "lies beyond the field"
	case a.Wanted != "":
		return fmt.Sprintf("lies in rows of %s, which is wanted", a.Wanted)
	case !a.Open:
		return "stands in rows that are in other use, or off the device or the detector"
	case a.Full > trade.Fullest:
		return fmt.Sprintf("would fill its brightest pixel to %.3g times the limit", a.Full)
	case a.Held < leastHeld*a.Best:
		return fmt.Sprintf("lies between two elements: element %d holds %.0f %% of its light, and %.0f %% with the star in its middle", a.Element, 100*a.Held, 100*a.Best)
	case a.SNR*leastPart*priorScatter <= 1:
		return fmt.Sprintf("is too faint: a frame has a S/N of %.3g of it, which says nothing about a scatter of %.0f %%", a.SNR, 100*priorScatter)
	}
	return ""
}

// meets tells whether rows chosen already overlap those of a star.
func (p *picking) meets(a forecast.Alone) bool {
	return slices.ContainsFunc(p.target.SentinelRows, func(r sequence.SentinelRow) bool { return r.First <= a.Last && a.First <= r.Last })
}

// darkError is how well the dark columns are to measure a frame's transmission on the
// forecast's light, rms of 1: the error that hadamard's fit states of frames drawn by the
// forecast, with what reduce thinks beforehand. What reduce thinks, where dark columns are off.
func (p *picking) darkError(ctx context.Context) (float64, error) {
	if p.code.Family() == hadamard.SlitScan || len(p.dark) == 0 {
		return priorScatter, nil
	}
	checks, err := hadamard.NewChecks(p.code, p.dark)
	if err != nil {
		return 0, err
	}
	if !checks.Reliable() {
		return priorScatter, nil
	}
	gram, err := p.drawn(ctx)
	if err != nil {
		return 0, err
	}
	times := make([]float64, p.code.V())
	for k := range times {
		times[k] = float64(k)/float64(max(len(times)-1, 1)) - 0.5
	}
	fit, err := checks.Throughput(gram, hadamard.DefaultThroughputPrior(times, priorScatter, priorTrend))
	if err != nil {
		return 0, err
	}
	return fit.Error, nil
}

// mostProducts bounds the products of a Gram matrix: a second's work. Fewer pixels than the
// detector has overstate the error of faint fields alone.
const mostProducts = 4e9

// drawn is the Gram matrix of frames of the forecast's light without drift, noise drawn anew
// for each pixel that a sampled one stands for.
func (p *picking) drawn(ctx context.Context) (*hadamard.Gram, error) {
	s, err := p.light.Sampled(p.candidate)
	if err != nil {
		return nil, err
	}
	v := p.code.V()
	total := 0.0
	for _, n := range s.Stands {
		total += n
	}
	scale := min(1, mostProducts/(float64(v)*float64(v))/total)
	rng := random(uint64(p.target.Code.Seed), "noise of a forecast", 0)
	open := p.openElements()
	g := hadamard.NewGram(v)
	for x := range s.Quiet {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		n := max(1, int(math.Round(s.Stands[x]*scale)))
		y, s2 := make([]float32, v*n), make([]float32, v*n)
		for k := range v {
			light := 0.0
			for _, j := range open[k] {
				light += s.Light[j][x]
			}
			variance := s.Quiet[x] + s.Photon*light
			for i := range n {
				y[k*n+i] = float32(light + math.Sqrt(variance)*rng.NormFloat64())
				s2[k*n+i] = float32(variance)
			}
		}
		g.Add(y, s2, n, n, 0)
	}
	return g, nil
}

// openElements are the elements that each code row opens.
func (p *picking) openElements() [][]int {
	open := make([][]int, p.code.V())
	for k := range open {
		j := 0
		for column, bit := range p.code.Row(k) {
			if slices.Contains(p.dark, column) {
				continue
			}
			if bit != 0 {
				open[k] = append(open[k], j)
			}
			j++
		}
	}
	return open
}
