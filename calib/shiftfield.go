package calib

import (
	"fmt"
	"math"
)

// ShiftField tells where in the field of view the light of a voxel is: that of voxel l at
// element j and trace row y lies at element j + Elements[l] and row y + Rows[l]. The air's
// refraction makes such shifts, or a pointing other than that of the voxels. It joins them
// to the trace's own, so that rows are interpolated once (Gather), and says with what
// weights voxels of neighbouring elements make one (Across). Immutable: any number of
// goroutines may share it.
type ShiftField struct {
	elements, rows []float64
	trace          []float64 // t(x)
	low, high      float64   // of all shifts of rows
	detectorRows   int
	across, along  *RowShift // with voxels in the place of columns
}

// NewShiftField is for a field of n elements and for trace rows whose own shift is trace,
// by column; elements and rows are the shifts of each voxel. The slices are kept.
func NewShiftField(trace, elements, rows []float64, n, detectorRows int) (*ShiftField, error) {
	if len(elements) != len(rows) || len(rows) == 0 {
		return nil, fmt.Errorf("shift of the field: %d shifts of elements and %d of rows", len(elements), len(rows))
	}
	if n < points {
		return nil, fmt.Errorf("a field of %d elements is too small to be shifted, which needs %d: leave out grid.refraction and grid.onto, or plan more elements", n, points)
	}
	f := &ShiftField{elements: elements, rows: rows, trace: trace, detectorRows: detectorRows}
	var err error
	if f.across, err = NewRowShift(elements, n); err != nil {
		return nil, err
	}
	if f.along, err = NewRowShift(rows, detectorRows); err != nil {
		return nil, err
	}
	lowest, highest := bounds(trace)
	least, most := bounds(rows)
	f.low, f.high = lowest+least, highest+most
	return f, nil
}

func bounds(x []float64) (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	for _, v := range x {
		low, high = min(low, v), max(high, v)
	}
	return low, high
}

// Span is a range of detector rows, inclusive, that holds all that trace row y0 reads.
func (f *ShiftField) Span(y0 int) (first, last int) {
	first = int(math.Floor(float64(y0)+f.low)) - points/2
	last = int(math.Ceil(float64(y0)+f.high)) + points/2
	// Beyond the detector's ends stencils are one-sided.
	first = min(max(first, 0), f.detectorRows-points)
	return first, max(min(last, f.detectorRows-1), first+points-1)
}

// Sources is the range of elements, inclusive, of which the voxels of element j are made.
func (f *ShiftField) Sources(j int) (first, last int) { return f.across.Span(j) }

// Across gives the weights of the elements first, first+1, ... in voxel l of element j.
// They are not to be changed.
func (f *ShiftField) Across(j, l int) (first int, w []float32) { return f.across.Weights(j, l) }

// Along gives the weights of trace rows first, first+1, ... in a voxel l of trace row y0:
// those of what does not follow the trace, such as the slit function.
func (f *ShiftField) Along(y0, l int) (first int, w []float32) { return f.along.Weights(y0, l) }

// Shift is that of voxel l, in elements and rows.
func (f *ShiftField) Shift(l int) (elements, rows float64) { return f.elements[l], f.rows[l] }

// Mix makes the spectrum of element j of those of Sources(j), sources[i] that of element
// first+i, by voxel: signals by the weights, variances by their squares, flags where the
// weight is above 0.1, and Partial or NoData where the field ends. Values must be finite.
func (f *ShiftField) Mix(dst []float32, sources [][]float32, first, j int) {
	f.across.Signal(dst, sources, first, j)
}

// MixVariance is Mix for variances.
func (f *ShiftField) MixVariance(dst []float32, sources [][]float32, first, j int) {
	f.across.Variance(dst, sources, first, j)
}

// MixFlags is Mix for flags.
func (f *ShiftField) MixFlags(dst *RowFlags, sources [][]Flag, first, j int) {
	f.across.Flags(dst, sources, first, j)
}

// Gather holds the weights with which one trace row of one element is gathered from the
// detector's rows. One goroutine at a time uses it.
type Gather struct {
	plan    rowPlan
	column  stencil
	y0      int
	columns int
	x0, x1  int
	shift   []float64
}

// NewGather makes one for trace rows of f.
func (f *ShiftField) NewGather() *Gather {
	return &Gather{column: stencil{size: f.detectorRows, table: tails()}, columns: len(f.trace)}
}

// Set computes the weights of trace row y0 of an element whose voxels have these edges, in
// detector columns: a column's shift is that of its wavelength, by a straight line between
// the voxels' middles. Only columns that the voxels reach have weights.
func (f *ShiftField) Set(g *Gather, y0 int, edges []float64) {
	const reach = points + 1 // of a voxel's weights beyond its edges
	low, high := min(edges[0], edges[len(edges)-1]), max(edges[0], edges[len(edges)-1])
	g.y0 = y0
	g.x0 = max(0, int(math.Floor(max(low, 0)))-reach)
	g.x1 = min(g.columns, int(math.Ceil(min(high, float64(g.columns))))+reach+1)
	// One-sided stencils at the ends of a row read on into it.
	g.x0, g.x1 = min(g.x0, max(0, g.columns-2*reach)), max(g.x1, min(g.columns, 2*reach))
	g.shift = g.shift[:0]
	middle := func(l int) float64 { return (edges[l] + edges[l+1]) / 2 }
	n := len(f.rows)
	l, step, end := 0, 1, n-1 // towards rising columns
	if edges[0] > edges[n] {
		l, step, end = n-1, -1, 0
	}
	for x := g.x0; x < g.x1; x++ {
		for l != end && middle(l+step) <= float64(x) {
			l += step
		}
		shift := f.rows[l]
		if at := middle(l); l != end && at < float64(x) {
			t := (float64(x) - at) / (middle(l+step) - at)
			shift += t * (f.rows[l+step] - shift)
		}
		g.shift = append(g.shift, shift+f.trace[x])
	}
	g.plan.set(&g.column, y0, g.x0, g.columns, g.shift)
}

// Signal writes the trace row to dst, by column; rows[i] is detector row first+i, and
// Span(y0) must be among them. Columns without weights are left as they are.
func (g *Gather) Signal(dst []float32, rows [][]float32, first int) {
	g.plan.signal(dst, rows, g.y0-first, 0, g.columns)
}

// Variance is Signal for variances.
func (g *Gather) Variance(dst []float32, rows [][]float32, first int) {
	g.plan.variance(dst, rows, g.y0-first)
}

// Flags gathers flags as RowShift does.
func (g *Gather) Flags(dst *RowFlags, rows [][]Flag, first int) {
	dst.resize(g.columns)
	clear(dst.Bits)
	clear(dst.Reach)
	g.plan.flags(dst, rows, g.y0-first)
}

// Columns are those with weights, from..to-1.
func (g *Gather) Columns() (from, to int) { return g.x0, g.x1 }

// Weights are those of the detector rows first, first+1, ... at column x.
func (g *Gather) Weights(x int) (first int, w []float32) { return g.plan.at(g.y0, x) }
