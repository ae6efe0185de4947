package forecast

import (
	"math"

	"mirrorloom/pipeline/instrument"
)

// rowLight is the light on a trace row (a detector row that follows the trace), electrons a
// second by column.
type rowLight struct {
	// overlap is that of all elements, leak that of all mirrors of the device when closed.
	overlap, leak []float64
	// xi[x] is the dispersed distance, px, of what a mirror in the middle sends to x.
	xi []float64
}

// rowParts are a piece's parts of the mirrors of row w, by u from uFirst.
func (f *deviceLight) rowParts(p *piece, w int) []float64 {
	if parts := p.parts[w]; parts != nil {
		return parts
	}
	d := f.light.profile.DMD
	parts := make([]float64, f.uLast-f.uFirst+1)
	for i := range parts {
		u := f.uFirst + i
		if d.Mounting == instrument.Diagonal && (u-w)&1 != 0 {
			continue
		}
		column, row := f.onDevice(float64(u), float64(w))
		if column < 0 || row < 0 || column > float64(d.Columns-1) || row > float64(d.Rows-1) {
			continue
		}
		if p.image == nil {
			parts[i] = p.flat
			continue
		}
		dc, dr := column-p.column, row-p.row
		if reach := p.image.reach(); math.Abs(dc) <= reach && math.Abs(dr) <= reach {
			parts[i] = p.image.part(dc, dr)
		}
	}
	p.parts[w] = parts
	return parts
}

// shut tells whether mirrors (u, w) stay closed in every coded step.
func (f *fieldLight) shut(u, w int) bool {
	for _, r := range f.closed {
		if w < r.First || w > r.Last {
			continue
		}
		if r.Element < 0 || u >= f.first+r.Element*f.mirrors && u < f.first+(r.Element+1)*f.mirrors {
			return true
		}
	}
	return false
}

// sharesOf are what mirrors of the strip that open put on trace row q, of each piece.
func (f *fieldLight) sharesOf(q int) []*share {
	if list := f.shares[q]; list != nil {
		return list
	}
	list := make([]*share, len(f.pieces))
	for i, p := range f.pieces {
		list[i] = f.gather(p, q, f.first, f.last, f.shut)
	}
	f.shares[q] = list
	return list
}

// leak is what all mirrors of the device put on trace row q when closed, electrons a second
// by column.
func (f *deviceLight) leak(q int, xi []float64) []float64 {
	if row := f.leaks[q]; row != nil {
		return row
	}
	var few []float64
	for x := 0; x < len(xi)+leakColumns; x += leakColumns {
		few = append(few, xi[min(x, len(xi)-1)])
	}
	leaks := make([]float64, len(few))
	for _, p := range f.pieces {
		f.addShare(leaks, few, p.leaked, f.gather(p, q, f.uFirst, f.uLast, nil))
	}
	row := make([]float64, len(xi))
	for x := range row {
		i, part := x/leakColumns, float64(x%leakColumns)/leakColumns
		row[x] = leaks[i] + (leaks[i+1]-leaks[i])*part
	}
	f.leaks[q] = row
	return row
}

// leakColumns is how far apart the leak is worked out, and taken for straight between: it is
// the sum over all mirrors, a thousandth part of the light, and smooth but for lines of
// single sources.
const leakColumns = 8

// gather adds up the parts of mirror rows, each times the part of its spot that falls on the
// trace row; shut, if not nil, tells which are left out.
func (f *deviceLight) gather(p *piece, q, first, last int, shut func(u, w int) bool) *share {
	s := f.light.profile.Spectrograph
	out := &share{part: make([]float64, f.uLast-f.uFirst+1)}
	reach := 6*f.sigma + 0.5
	at := (float64(q) - s.YCenterPx) / s.WStepPx
	from := max(int(math.Ceil(f.wMiddle+at-reach/math.Abs(s.WStepPx))), f.wFirst)
	to := min(int(math.Floor(f.wMiddle+at+reach/math.Abs(s.WStepPx))), f.wLast)
	for w := from; w <= to; w++ {
		d := float64(q) - s.YCenterPx - s.WStepPx*(float64(w)-f.wMiddle)
		weight := between(d-0.5, d+0.5, f.sigma)
		parts := f.rowParts(p, w)
		for u := first; u <= last; u++ {
			if v := parts[u-f.uFirst]; v != 0 && (shut == nil || !shut(u, w)) {
				out.part[u-f.uFirst] += weight * v
			}
		}
	}
	out.trim()
	return out
}

// trim finds where there is light.
func (s *share) trim() {
	s.from, s.to = len(s.part), 0
	for i, v := range s.part {
		if v != 0 {
			s.from, s.to = min(s.from, i), i+1
		}
	}
}

// row is the light of trace row q.
func (f *fieldLight) row(q int) *rowLight {
	if r := f.rows[q]; r != nil {
		return r
	}
	n := f.light.profile.Detector.Columns
	r := &rowLight{overlap: make([]float64, n), xi: f.dispersedAt(q)}
	r.leak = f.leak(q, r.xi)
	for i, s := range f.sharesOf(q) {
		f.addShare(r.overlap, r.xi, f.pieces[i].still, s)
		f.addMoving(r.overlap, r.xi, f.pieces[i], s, q)
	}
	f.rows[q] = r
	return r
}

// dispersedAt is xi of trace row q.
func (f *deviceLight) dispersedAt(q int) []float64 {
	s := f.light.profile.Spectrograph
	xi := make([]float64, f.light.profile.Detector.Columns)
	for x := range xi {
		d := float64(x) - s.XCenterPx
		y := float64(q) + d*(s.TraceTilt+s.TraceCurvePerPx*d) - s.YCenterPx
		xi[x] = d - y*(s.SlitTilt+s.SmilePerPx*y)
	}
	return xi
}

// across is how far from x_c mirrors of u send their light, px.
func (f *deviceLight) across(i int) float64 {
	return f.light.profile.Spectrograph.UStepPx * (float64(f.uFirst+i+f.light.target.OffsetU()) - f.middle)
}

// evenWithin is how alike shares of neighbours are that are summed at once.
const evenWithin = 1e-9

// addShare adds a table's light by shares: runs of equal ones at once.
func (f *deviceLight) addShare(dst, xi []float64, t *table, s *share) {
	for i := s.from; i < s.to; {
		v := s.part[i]
		end := i + 1
		for end < s.to && math.Abs(s.part[end]-v) <= evenWithin*v {
			end++
		}
		// u rises from i to end-1; the table's sums go down from the largest argument.
		start := f.across(i)
		if f.light.profile.Spectrograph.UStepPx < 0 {
			start = f.across(end - 1)
		}
		if v != 0 {
			for x := range dst {
				if end-i == 1 {
					dst[x] += v * t.at(xi[x]-start)
				} else {
					dst[x] += v * t.sum(xi[x]-start, end-i)
				}
			}
		}
		i = end
	}
}

// addMoving adds lines that move.
func (f *deviceLight) addMoving(dst, xi []float64, p *piece, s *share, q int) {
	if p.motion == nil {
		return
	}
	for i := s.from; i < s.to; i++ {
		if s.part[i] == 0 {
			continue
		}
		kmS := p.motion.at(f.placeOf(i, q)) - p.motion.systemic
		for k := range p.lines {
			f.addLine(dst, xi, &p.lines[k], kmS, f.across(i), s.part[i], 0)
		}
	}
}

// addLine adds a line where it falls; dst[i] is column x0+i.
func (f *deviceLight) addLine(dst, xi []float64, e *line, kmS, across, part float64, x0 int) {
	reach := 6*e.sigma + 1.5
	centre := e.px + kmS*e.perKmS + across
	// xi is nearly x - x_c: the slant of rows, a few px, is allowed for by looking there.
	guess := int(centre + f.light.profile.Spectrograph.XCenterPx + f.slantNear(xi))
	from, to := max(guess-int(reach)-4, x0), min(guess+int(reach)+5, x0+len(dst))
	for x := from; x < to; x++ {
		dst[x-x0] += part * e.at(xi[x]-across, kmS)
	}
}

// slantNear is the slant of a row at its middle, px; along it it changes by a px or two.
func (f *deviceLight) slantNear(xi []float64) float64 {
	m := len(xi) / 2
	return float64(m) - f.light.profile.Spectrograph.XCenterPx - xi[m]
}

// placeOf is the place in the field of mirrors of u on trace row q, arc seconds along u and w.
func (f *deviceLight) placeOf(i, q int) (u, w float64) {
	p := f.light.profile
	a := p.ArcsecPerU()
	return (float64(f.uFirst+i) - f.middle) * a, (float64(q) - p.Spectrograph.YCenterPx) / p.Spectrograph.WStepPx * a
}

// element is the light of element j at columns x0 <= x < x1 of trace row q, of the pieces
// that of picks: their continuum and still lines, or their lines alone.
func (f *fieldLight) element(dst []float64, j, q, x0 int, of func(source int) bool, linesOnly bool) {
	xi := f.row(q).xi
	first := f.first + j*f.mirrors - f.uFirst
	shares := f.sharesOf(q)
	for k, p := range f.pieces {
		if !of(p.source) {
			continue
		}
		s := shares[k]
		for i := max(first, s.from); i < min(first+f.mirrors, s.to); i++ {
			v := s.part[i]
			if v == 0 {
				continue
			}
			across := f.across(i)
			if !linesOnly {
				for x := range dst {
					dst[x] += v * p.still.at(xi[x0+x]-across)
				}
			}
			if !linesOnly && p.motion == nil {
				continue // its lines are in the table
			}
			kmS := 0.0
			if p.motion != nil {
				kmS = p.motion.at(f.placeOf(i, q)) - p.motion.systemic
			}
			for k := range p.lines {
				f.addLine(dst, xi, &p.lines[k], kmS, across, v, x0)
			}
		}
	}
}
