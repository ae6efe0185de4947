package rehearse

import (
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// optics is all that is fixed in a night between the sky and the detector:
// where mirrors are, where their light lands and how it spreads.
type optics struct {
	profile  *instrument.Profile
	seq      *sequence.Sequence
	geometry Geometry
	field    *field
	spread   *spread
	axis     axis
	columns  int // of active pixels
	rows     int
	// wFirst and wLast bound the device's w.
	wFirst, wLast int
	// traceLow and traceHigh bound the trace's shift on the axis.
	traceLow, traceHigh float64
	// traces[i] is the trace's shift at grid point i.
	traces []float64
	// pxFrom and pxTo bound the dispersed distances that any mirror can send to
	// the axis.
	pxFrom, pxTo float64
}

func newOptics(seq *sequence.Sequence, g Geometry) *optics {
	p := seq.Profile
	o := &optics{
		profile: p, seq: seq, geometry: g, field: newField(seq),
		columns: p.Detector.Columns, rows: p.Detector.Rows,
		spread: newSpread(g.LSFFWHMPx / fwhmPerSigma),
	}
	o.axis = newAxis(o.columns, o.spread.sigma)
	o.wFirst, o.wLast = p.WRange()
	o.traces = make([]float64, o.axis.n)
	for i := range o.traces {
		o.traces[i] = g.trace(o.axis.at(i))
	}
	first, last := o.axis.at(0), o.axis.at(o.axis.n-1)
	o.traceLow, o.traceHigh = g.traceBounds(first, last)
	uFirst, uLast := p.URange()
	low, high := o.slantBounds()
	o.pxFrom = first - g.XCenterPx - g.across(float64(uLast)) - high - 1
	o.pxTo = last - g.XCenterPx - g.across(float64(uFirst)) - low + 1
	return o
}

// slantBounds are the least and largest slant of rows that any light on the
// detector comes from.
func (o *optics) slantBounds() (low, high float64) {
	low, high = math.Inf(1), math.Inf(-1)
	reach := reachSigmas*o.spread.sigma + 2
	for y := -reach; y <= float64(o.rows)+reach; y++ {
		s := o.geometry.slant(y)
		low, high = math.Min(low, s), math.Max(high, s)
	}
	return low, high
}

// mirrorRows are the mirror rows whose light reaches detector rows y0 <= y <= y1.
func (o *optics) mirrorRows(y0, y1 float64) (first, last int) {
	g := &o.geometry
	reach := reachSigmas*o.spread.sigma + 0.5
	low := (y0-reach-o.traceHigh-g.YCenterPx)/g.WStepPx + g.WMiddle
	high := (y1+reach-o.traceLow-g.YCenterPx)/g.WStepPx + g.WMiddle
	return max(int(math.Ceil(low)), o.wFirst), min(int(math.Floor(high)), o.wLast)
}
