package forecast

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/sequence"
)

// What reduce looks at to measure the throughput: so many pixels at most, fewer where v^2
// times their number is more work than reading the frames once.
const (
	fitPixels   = 1 << 16
	fitWork     = 1.5e9
	leastPixels = 256
)

// drawnScatter names the stream of random numbers that the scatter is drawn from.
const drawnScatter = 0x73636174

// sentinelMoves is by how much the error of a frame's transmission grows because reduce fits
// the image's moves besides: 1.3 and 1.7 in two rehearsed nights (reduce's
// TestNightOfPickedSentinels).
const sentinelMoves = 1.5

// TransmissionError is the error to which a star in sentinel rows measures a frame's
// transmission, relative: sentinelMoves over its S/N; +Inf for a star that gives no light.
func (a Alone) TransmissionError() float64 { return sentinelMoves / a.SNR }

// DarkThroughput is how well dark columns are to measure a frame's transmission on a
// candidate's light, relative: the error that hadamard's fit states of frames of that light,
// with what reduce thinks beforehand; what it thinks where dark columns are too few.
func (l *Light) DarkThroughput(ctx context.Context, c Candidate) (float64, error) {
	c, err := l.resolved(c)
	if err != nil {
		return 0, err
	}
	if !checks(c) || c.K == 1 {
		return hadamard.NightScatter, nil
	}
	l.mu.Lock()
	defer l.mu.Unlock()
	fit, err := l.fitDark(ctx, l.field(c, l.sightOf(l.Time(c))), c, 0, priorOf(hadamard.NightScatter, hadamard.NightTrend))
	if err != nil {
		return 0, err
	}
	return fit.Error, nil
}

// throughputKey is what throughputLeft depends on, light aside.
type throughputKey struct {
	family string
	v      int
	dwell  float64
	cycles int
}

// transmission is what is not known of the frames' transmission, relative.
type transmission struct {
	// rms is the error of a frame; rows that of each code row, nil where all are alike: a
	// row that opens bright stars is measured better.
	rms  float64
	rows []float64
}

// of is the error of a code row.
func (t *transmission) of(row int) float64 {
	if t.rows == nil {
		return t.rms
	}
	return t.rows[row]
}

// scaled is the same pattern of errors of another rms.
func (t *transmission) scaled(rms float64) transmission {
	out := transmission{rms: rms}
	if t.rows != nil && t.rms > 0 {
		out.rows = make([]float64, len(t.rows))
		for k, e := range t.rows {
			out.rows[k] = e * rms / t.rms
		}
	}
	return out
}

// throughputLeft is the error of the frames' transmission behind the reduction, rms of 1. Of
// a scatter d that the target states, it is what sentinel rows leave, then dark columns: the
// posterior of reduce's own fit (hadamard.Checks.Throughput under the prior that reduce has,
// which is what it puts into VARIANCE) where frames of the forecast's light with such a
// scatter surely pass its hold-out, and d itself where nothing measures it. Nothing of no scatter.
func (l *Light) throughputLeft(ctx context.Context, f *fieldLight, c Candidate) (transmission, error) {
	d := l.target.Forecast.ThroughputRMS
	if d == 0 {
		return transmission{}, nil
	}
	key := throughputKey{c.Family, c.V, c.DwellSeconds, c.Cycles}
	if left, ok := f.left[key]; ok {
		return left, nil
	}
	left, prior := transmission{rms: d}, nightPrior(nil)
	if own := l.sentinelError(f, c); own < math.Inf(1) {
		left.rms = hadamard.NightScatter * own / math.Hypot(hadamard.NightScatter, own)
		prior = priorOf(left.rms, 0)
	}
	if checks(c) && c.K > 1 {
		fit, err := l.fitDark(ctx, f, c, left.rms, prior)
		if err != nil {
			return left, err
		}
		if fit.Kept && (fit.Error < left.rms || fallOf(fit) > surely) {
			left = transmission{rms: fit.Error, rows: fit.CErr}
		}
	}
	f.left[key] = left
	return left, nil
}

// surely is the fall of the held-out chi-square from which a night will be corrected whatever
// its noise does, even where what reduce thinks beforehand makes the error larger than the
// scatter; the fit's own limit is 9.
const surely = 100

func fallOf(fit *hadamard.ThroughputFit) float64 {
	h := fit.HeldOut
	return h.Before - h.ExpectedBefore - (h.After - h.ExpectedAfter)
}

// fitDark is reduce's fit of frames of a candidate's light whose transmission scatters by d,
// drawn once; what frames would add by noise is its mean (hadamard.Gram.AddExpected). Without a
// prior it takes the one that reduce would by the same columns.
func (l *Light) fitDark(ctx context.Context, f *fieldLight, c Candidate, d float64, prior nightPrior) (*hadamard.ThroughputFit, error) {
	code, err := hadamard.New(hadamard.Family(c.Family), c.V)
	if err != nil {
		return nil, err
	}
	dark := c.darkColumns()
	checks, err := hadamard.NewChecks(code, dark)
	if err != nil {
		return nil, fmt.Errorf("forecast of the throughput: %w", err)
	}
	g, err := l.expectedGram(ctx, f, c, code, dark)
	if err != nil {
		return nil, err
	}
	rng := rand.New(rand.NewPCG(drawnScatter, uint64(c.V)))
	factor, times := make([]float64, c.V), make([]float64, c.V)
	for k := range factor {
		factor[k] = 1 + d*rng.NormFloat64()
		times[k] = (float64(k)/float64(c.V-1) - 0.5) / float64(c.Cycles)
	}
	checks, g = checks.WithoutPedestal(), g.Scaled(factor)
	if prior == nil {
		if prior, err = typicalPrior(checks, g, times, c.Cycles); err != nil {
			return nil, err
		}
	}
	return checks.Throughput(g, prior(times))
}

// typicalPrior is what reduce takes of hadamard.TypicalNights by the dark columns.
func typicalPrior(checks *hadamard.Checks, g *hadamard.Gram, times []float64, cycles int) (nightPrior, error) {
	nights := hadamard.TypicalNights()
	priors := make([]*mat.SymDense, len(nights))
	for i, n := range nights {
		priors[i] = priorOf(n.Scatter, n.Trend)(times)
	}
	evidence, err := checks.Evidence(g, priors)
	if err != nil {
		return nil, err
	}
	for i := range evidence {
		evidence[i] *= float64(cycles)
	}
	best := nights[max(0, hadamard.WidestLikely(evidence))]
	return priorOf(best.Scatter, best.Trend), nil
}

// nightPrior is the covariance of the rows' transmission that is thought of beforehand.
type nightPrior func(times []float64) *mat.SymDense

func priorOf(scatter, trend float64) nightPrior {
	return func(times []float64) *mat.SymDense { return hadamard.DefaultThroughputPrior(times, scatter, trend) }
}

// expectedGram is what the pixels that reduce looks at will say of a cycle.
func (l *Light) expectedGram(ctx context.Context, f *fieldLight, c Candidate, code *hadamard.Code, dark []int) (*hadamard.Gram, error) {
	s := f.sample(c.N)
	total := 0.0
	for _, n := range s.stands {
		total += n
	}
	v, frames := float64(c.V), float64(c.V*c.Cycles)
	seen := max(leastPixels, min(fitPixels, max(fitWork, frames*total)/(v*frames)))
	open := openElements(code, dark)
	g := hadamard.NewGram(c.V)
	const block = 128 // pixels
	for from := 0; from < len(s.quiet); from += block {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		n := min(block, len(s.quiet)-from)
		light, variance, counts := make([]float64, c.V*n), make([]float64, c.V*n), make([]int, n)
		for i := range counts {
			x := from + i
			counts[i] = max(1, int(math.Round(s.stands[x]*min(1, seen/total))))
			for k, list := range open {
				y := 0.0
				for _, j := range list {
					y += s.light[j][x]
				}
				y *= c.DwellSeconds
				light[k*n+i] = y
				variance[k*n+i] = s.quiet[x] + l.camera.photon*(y+(l.camera.darkEPS+s.leak[x])*c.DwellSeconds)
			}
		}
		g.AddExpected(light, variance, counts)
	}
	return g, nil
}

// openElements are the elements that each code row opens.
func openElements(code *hadamard.Code, dark []int) [][]int {
	open := make([][]int, code.V())
	for j, column := range litColumns(code.V(), dark) {
		for k := range open {
			if code.Bit(k, column) == 1 {
				open[k] = append(open[k], j)
			}
		}
	}
	return open
}

// sentinelError is the error of a frame's transmission by the target's sentinel rows, the
// best of them, relative; +Inf without any.
func (l *Light) sentinelError(f *fieldLight, c Candidate) float64 {
	best := math.Inf(1)
	for _, r := range l.target.SentinelRows {
		if r.Element < c.N {
			best = min(best, l.ofRows(f, c, r).TransmissionError())
		}
	}
	return best
}

// ofRows is what sentinel rows see in their element, all its light counted.
func (l *Light) ofRows(f *fieldLight, c Candidate, r sequence.SentinelRow) Alone {
	out := Alone{Source: anySource, Element: r.Element, First: r.First, Last: r.Last}
	bare := *f // the rows are closed for the code only
	bare.closed, bare.shares, bare.rows = nil, map[int][]*share{}, map[int]*rowLight{}
	l.expose(&out, &bare, c.DwellSeconds, sentinelEdges*l.profile.Spectrograph.LSFFWHMPx)
	return out
}
