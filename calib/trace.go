package calib

import (
	"fmt"
	"math"
)

// RowEnd is where lit mirror rows end, as seen on the detector.
type RowEnd struct {
	// Row is the nominal place of half the light at x = X_c:
	// Y_c + w_step (w - 1/2 - r_c) below the first lit row w, or w + 1/2 above the last.
	Row float64
	// Above: the light lies at higher rows (the lower end of the device).
	Above bool
}

// EdgePoint is a RowEnd measured at a column.
type EdgePoint struct {
	// Group: points of a group share their own constant, an end of the device or of an
	// element.
	Group   int
	Nominal float64 // RowEnd.Row
	X       float64 // px from 0, the mean of the light
	Y, YErr float64 // detector row of half the light, and its standard error
}

// TraceRule says how ends are measured. Zero values of fields other than FWHMPx take
// the default.
type TraceRule struct {
	// FWHMPx is that of a mirror's spot, px.
	FWHMPx float64
	// Columns are averaged to one point (8).
	Columns int
	// ReachPx is how far an end may be from nominal (6: traces off by 5 px from end to
	// end about the middle, and a margin).
	ReachPx float64
	// Sigmas is the least significance of the light inside an end (30: the place is
	// then known to a tenth of a pixel).
	Sigmas float64
}

// DefaultTraceRule is the rule for a spot.
func DefaultTraceRule(fwhmPx float64) TraceRule {
	return TraceRule{FWHMPx: fwhmPx, Columns: 8, ReachPx: 6, Sigmas: 30}
}

// Find measures the ends of rows in light whose rows end at the same device rows for
// all elements that shine at once: an all-on lamp frame where the lit rows make a
// rectangle (square mounting; diagonal with its corners closed), one element's decoded
// light or arc exposure in any case. firstGroup numbers the first end, the others
// follow. Ends off the detector, and columns with too little light, give no point.
//
// The profile along y of each bin of columns is fitted by
//
//	s(y) = background + (level + slope (y - end)) Phi(+-(y - end)/sigma),
//
// the edge of many spots side by side, with sigma that of the spot, by Gauss-Newton
// from where the light crosses half its height.
func (r TraceRule) Find(e Exposure, ends []RowEnd, firstGroup int) ([]EdgePoint, error) {
	if err := e.check(); err != nil {
		return nil, err
	}
	d := DefaultTraceRule(r.FWHMPx)
	if r.Columns > 0 {
		d.Columns = r.Columns
	}
	if r.ReachPx > 0 {
		d.ReachPx = r.ReachPx
	}
	if r.Sigmas > 0 {
		d.Sigmas = r.Sigmas
	}
	if !(d.FWHMPx >= 1) || math.IsInf(d.FWHMPx, 0) {
		return nil, fmt.Errorf("trace: a spot's width of %g px is none; give its FWHM, 1 px or more", d.FWHMPx)
	}
	var points []EdgePoint
	for k, end := range ends {
		for x := 0; x < e.Columns; x += d.Columns {
			if p, ok := d.point(&e, end, x, min(x+d.Columns, e.Columns)); ok {
				p.Group, p.Nominal = firstGroup+k, end.Row
				points = append(points, p)
			}
		}
	}
	return points, nil
}

// point measures one end in columns x0..x1-1.
func (r TraceRule) point(e *Exposure, end RowEnd, x0, x1 int) (EdgePoint, bool) {
	// Inside, the level is read over a spot's width or two; outside, as much dark.
	margin := r.ReachPx + 2.5*r.FWHMPx
	first, last := int(math.Floor(end.Row-margin)), int(math.Ceil(end.Row+margin))
	first, last = max(first, 0), min(last, e.Rows()-1)
	f := newEdgeFit(e, end, r.FWHMPx, x0, x1, first, last)
	// The whole edge must be seen wherever it lies: a spot's width on both sides.
	if !f.start(r.ReachPx) || f.end-float64(first) < r.FWHMPx || float64(last)-f.end < r.FWHMPx {
		return EdgePoint{}, false
	}
	if !f.solve(r.ReachPx) || f.level < r.Sigmas*f.levelErr {
		return EdgePoint{}, false
	}
	return EdgePoint{X: f.meanX(), Y: f.end, YErr: f.endErr}, true
}
