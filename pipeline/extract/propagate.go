package extract

import (
	"context"
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"mirrorloom/calib"
)

// Lags is the number of neighbouring channels, on each side, with which a channel's
// covariance is given. Beyond it channels share no pixel; only the coupling of
// elements is left, a v-th of the variance.
const Lags = 16

// covariances of the channels of an aperture and of sums over them.
type covariances struct {
	// channels is [channel][lag]: the covariance of channel l with l + lag.
	channels [][]float64
	// sums are the variances of the sums asked for.
	sums []float64
}

func newCovariances(channels, sums int) *covariances {
	return &covariances{table[float64](channels, Lags+1), make([]float64, sums)}
}

// add takes those of something independent.
func (v *covariances) add(o *covariances) {
	for l, row := range o.channels {
		for lag, x := range row {
			v.channels[l][lag] += x
		}
	}
	for i, x := range o.sums {
		v.sums[i] += x
	}
}

// propagator carries the weights of an aperture back to the detector.
type propagator struct {
	c    *Cube
	a    *aperture
	sums [][]float64 // [sum][channel]
	// sumsOnly leaves the covariances of channels out.
	sumsOnly bool
	light    lightRows
	// perCount turns the cube's unit into electrons, see lightRows. even: see isEven; of
	// are then the elements whose light is needed, nil for all.
	perCount []float64
	even     bool
	of       []int
	// stepwise forbids moments, see throughputmoves.go.
	stepwise bool
	// elements are those whose light the aperture's voxels are made of, slot the place of
	// each among them.
	elements []int
	slot     map[int]int
	// rowAt is the first cell of each row, from a.firstRow on, one more than rows.
	rowAt  []int
	pixels map[int]*pixelRow
	traces map[int]*traceRow
	fork   *coupling
	parts  []*part // by block of columns
}

// part is what a block of columns has added so far. Blocks are added in order, so
// that the result does not depend on the number of workers.
type part struct {
	x0, n      int
	channels   [][]float64 // [channel][lag]
	sums       []float64
	throughput [][]float64   // [sum][code row]: the weight of a relative error of the step
	perChannel [][]float32   // [code row][channel]: the same of each channel, or
	moments    [][][]float32 // [slot][channel][element]: see throughputmoves.go; nil in nil
	across     []float32     // scratch, [pixel][element]
	b          block
	k          *coupling
	pairs      [][]float64
	// Of the elements' slots and the block's columns: the channels lo..hi-1 that
	// reach a pixel, and where in values their weights stand.
	lo, hi, at []int32
	values     []float64
	row        []float64 // scratch, a channel each
	column     []float64 // scratch, a code row each
	sumWeights []float32 // [code column][pixel]
	sumSamples []float32
}

// propagate computes the covariances of the weighted sums over the aperture and of
// sums of channels with the weights sums, [sum][channel].
func (c *Cube) propagate(ctx context.Context, a *aperture, sums [][]float64) (*covariances, error) {
	return c.carry(ctx, a, sums, false)
}

// variancesOf computes those of sums of channels alone, which takes less time.
func (c *Cube) variancesOf(ctx context.Context, a *aperture, sums [][]float64) ([]float64, error) {
	v, err := c.carry(ctx, a, sums, true)
	if err != nil {
		return nil, err
	}
	return v.sums, nil
}

func (c *Cube) newPropagator(a *aperture) *propagator {
	p := &propagator{c: c, a: a, pixels: map[int]*pixelRow{}, traces: map[int]*traceRow{}, slot: map[int]int{}}
	for _, j := range a.elements {
		first, last := c.sourcesOf(j)
		for s := first; s <= last; s++ {
			if _, known := p.slot[s]; !known {
				p.slot[s] = len(p.elements)
				p.elements = append(p.elements, s)
			}
		}
	}
	p.fork = c.newCoupling(p.elements)
	return p
}

func (c *Cube) carry(ctx context.Context, a *aperture, sums [][]float64, sumsOnly bool) (*covariances, error) {
	if c.members != nil {
		return c.carryMembers(ctx, a, sums, sumsOnly)
	}
	p := c.newPropagator(a)
	p.sums, p.sumsOnly = sums, sumsOnly
	if err := p.walk(ctx); err != nil {
		return nil, err
	}
	return p.result()
}

// walk adds what the pixels of all rows contribute.
func (p *propagator) walk(ctx context.Context) error {
	c, a := p.c, p.a
	p.rowAt = rowStarts(a)
	var err error
	if p.perCount, err = p.electrons(); err != nil {
		return err
	}
	p.light = c.source().light(p.perCount)
	p.chooseEven()
	for x0 := 0; x0 < c.noise.Columns; x0 += blockPixels {
		p.parts = append(p.parts, p.newPart(x0))
	}
	first, last := c.Rows, -1
	for y0 := a.firstRow; y0 < a.endRow; y0++ {
		if p.rowAt[y0-a.firstRow] < p.rowAt[y0-a.firstRow+1] {
			f, l := c.span(y0)
			first, last = min(first, f), max(last, l)
		}
	}
	for y := first; y <= last; y++ {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := p.row(y); err != nil {
			return err
		}
	}
	return nil
}

// rowStarts are the places of each row's first cell, from a.firstRow on.
func rowStarts(a *aperture) []int {
	at := make([]int, a.endRow-a.firstRow+1)
	for _, k := range a.cells {
		at[k.row-a.firstRow+1]++
	}
	for i := range len(at) - 1 {
		at[i+1] += at[i]
	}
	return at
}

func (p *propagator) newPart(x0 int) *part {
	c := p.c
	w := &part{x0: x0, n: min(blockPixels, c.noise.Columns-x0), k: p.fork.fork()}
	channels := c.Grid.Count
	w.channels = table[float64](channels, Lags+1)
	w.sums = make([]float64, len(p.sums))
	w.b.x0, w.b.n = x0, w.n
	w.pairs = table[float64](len(p.elements), len(p.elements))
	m := len(p.elements) * w.n
	w.lo, w.hi, w.at = make([]int32, m), make([]int32, m), make([]int32, m)
	w.row, w.column = make([]float64, channels+Lags+1), make([]float64, c.noise.V)
	if c.hasThroughput() {
		w.throughput = table[float64](len(p.sums), c.noise.V)
		if p.byMoments() {
			w.moments = table[[]float32](len(p.elements), channels)
		} else {
			w.perChannel = table[float32](c.noise.V, channels)
		}
	}
	return w
}

// row adds what the pixels of detector row y contribute.
func (p *propagator) row(y int) error {
	traces, err := p.tracesOf(y)
	if err != nil {
		return err
	}
	if len(traces) == 0 {
		return nil
	}
	light, err := p.lightOf(y)
	if err != nil {
		return err
	}
	pixels, err := p.pixelsOf(y)
	if err != nil {
		return err
	}
	var next atomic.Int64
	var workers sync.WaitGroup
	for range min(runtime.GOMAXPROCS(0), len(p.parts)) {
		workers.Go(func() {
			for i := int(next.Add(1)) - 1; i < len(p.parts); i = int(next.Add(1)) - 1 {
				p.block(p.parts[i], y, traces, light, pixels)
			}
		})
	}
	workers.Wait()
	return nil
}

// tracesOf gives the trace rows of the aperture that read detector row y, in order.
func (p *propagator) tracesOf(y int) ([]*traceRow, error) {
	var all []*traceRow
	for y0 := p.a.firstRow; y0 < p.a.endRow; y0++ {
		from, to := p.rowAt[y0-p.a.firstRow], p.rowAt[y0-p.a.firstRow+1]
		first, last := p.c.span(y0)
		if last < y {
			delete(p.traces, y0)
		}
		if from == to || y < first || y > last {
			continue
		}
		if p.traces[y0] == nil {
			t, err := p.newTrace(y0, from, to)
			if err != nil {
				return nil, err
			}
			p.traces[y0] = t
		}
		all = append(all, p.traces[y0])
	}
	for old := range p.pixels {
		if old < y {
			delete(p.pixels, old)
		}
	}
	return all, nil
}

func (p *propagator) newTrace(y0, from, to int) (*traceRow, error) {
	c := p.c
	first, last := c.span(y0)
	var rows []*pixelRow
	for y := first; y <= last; y++ {
		r, err := p.pixelsOf(y)
		if err != nil {
			return nil, err
		}
		rows = append(rows, r)
	}
	gathers := map[int]*calib.Gather{}
	known := map[int]*elementRow{}
	straight := make([][]float32, len(rows[0].own)) // where all gather alike
	t, err := c.newTraceRow(p.a, y0, from, to, func(element int) *elementRow {
		if known[element] != nil {
			return known[element]
		}
		r := &elementRow{slot: p.slot[element], edges: make([]float64, c.Grid.Count+1)}
		known[element] = r
		c.geometry.Places(r.edges, float64(element), float64(y0), c.edges)
		own := min(r.slot, len(straight)-1)
		if r.variance = straight[own]; r.variance != nil && c.field == nil {
			return r
		}
		r.variance = make([]float32, c.noise.Columns)
		straight[own] = r.variance
		variances := make([][]float32, len(rows))
		for i, row := range rows {
			variances[i] = row.own[own]
		}
		if c.field == nil {
			c.shift.Variance(r.variance, variances, first, y0)
			return r
		}
		g := c.field.NewGather()
		c.field.Set(g, y0, r.edges)
		g.Variance(r.variance, variances, first)
		gathers[r.slot] = g
		return r
	})
	if err == nil && c.field != nil {
		t.gathers = gathers
	}
	return t, err
}

func (p *propagator) pixelsOf(y int) (*pixelRow, error) {
	if r := p.pixels[y]; r != nil {
		return r, nil
	}
	r, err := p.c.readPixels(y)
	if err != nil {
		return nil, err
	}
	if r.own == nil {
		// A reader of its own: this one goes ahead of the rows that are added.
		light, err := p.c.source().light(p.perCount).row(y)
		if err != nil {
			return nil, err
		}
		p.c.ownVariances(r, light, p.elements)
	}
	p.pixels[y] = r
	return r, nil
}

// result adds the blocks, and the errors that pixels do not tell.
func (p *propagator) result() (*covariances, error) {
	out := newCovariances(p.c.Grid.Count, len(p.sums))
	for _, w := range p.parts {
		out.add(&covariances{w.channels, w.sums})
	}
	p.addThroughput(out)
	p.addResponse(out)
	return out, p.addOnSky(out)
}

// addThroughput adds the errors of the steps' throughput, which all pixels share.
func (p *propagator) addThroughput(out *covariances) {
	if !p.c.hasThroughput() {
		return
	}
	moves := table[float64](p.c.noise.V, p.c.Grid.Count)
	for _, w := range p.parts {
		p.moves(moves, w)
	}
	for k, e := range p.c.noise.ThroughputErr {
		if !(e > 0) {
			continue
		}
		addOuter(out.channels, moves[k], e*e)
		for i := range p.sums {
			total := 0.0
			for _, w := range p.parts {
				total += w.throughput[i][k]
			}
			out.sums[i] += e * e * total * total
		}
	}
}

// addOuter adds scale x x' to a band of a matrix.
func addOuter(band [][]float64, x []float64, scale float64) {
	for l, v := range x {
		if v == 0 {
			continue
		}
		for lag := range band[l] {
			if l+lag < len(x) {
				band[l][lag] += scale * v * x[l+lag]
			}
		}
	}
}

// addResponse adds the errors of slit function and efficiency. That of the slit is
// one number for the voxels of a cell. That of the efficiency is shared by the rows
// of an element and by neighbouring wavelengths, here by all, which is a bound.
func (p *propagator) addResponse(out *covariances) {
	if !p.c.noise.Response {
		return
	}
	channels := p.c.Grid.Count
	light := make([]float64, channels)
	add := func() {
		addOuter(out.channels, light, 1)
		for i, sum := range p.sums {
			total := 0.0
			for l, v := range light {
				total += sum[l] * v
			}
			out.sums[i] += total * total
		}
	}
	for i, k := range p.a.cells {
		root := math.Sqrt(p.a.slitVariance[i])
		for l := range light {
			elements, rows := p.c.shares(k, l)
			light[l] = root * math.Sqrt(elements*rows) * p.a.weighted(p.c.onSky, i, l)
		}
		add()
	}
	for slot, j := range p.a.elements {
		clear(light)
		for i, k := range p.a.cells {
			if p.a.slot[i] == slot {
				for l := range light {
					elements, _ := p.c.shares(k, l)
					light[l] += math.Sqrt(elements) * p.a.weighted(p.c.onSky, i, l)
				}
			}
		}
		for l := range light {
			light[l] *= math.Sqrt(p.c.bandVarianceAt(j, l))
		}
		add()
	}
}

// weighted is a voxel's part of the sum, with the sky that was taken off it.
func (a *aperture) weighted(o *onSky, i, l int) float64 {
	if a.weight[i][l] == 0 {
		return 0
	}
	light, _ := o.before(a, i, l)
	return a.weight[i][l] * light
}
