package report

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"time"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Curve is the throughput of the frames by one method.
type Curve struct {
	Method string
	// Minutes are the middles of the exposures since that of the first science frame; C is
	// the throughput and Err its standard error, +Inf or NaN where a frame was not measured.
	Minutes, C, Err []float64
}

func (c *Curve) known(i int) bool {
	return !math.IsNaN(c.C[i]) && !math.IsNaN(c.Err[i]) && !math.IsInf(c.Err[i], 0)
}

// The timeline: a lane a kind of frame, and below them the throughput.
const (
	laneHeight      = 22.0
	laneTick        = 13.0
	throughputGap   = 26.0
	throughputPlot  = 150.0
	timelineLeft    = 92.0
	dateLayout      = "2006-01-02T15:04:05"
	mostNamedCurves = 3
)

// frameAt is a frame of the timeline.
type frameAt struct {
	at   float64 // hours UTC since the day of the first frame began
	used bool
}

// lane holds the frames of a kind.
type lane struct {
	name    string
	frames  []frameAt
	missing int // steps without a frame
}

// timeline is what the ledger tells of when frames were taken.
type timeline struct {
	lanes       []lane
	first, last float64 // hours, of starts and ends
	zero        float64 // hours: the middle of the first science frame that was used
	date        string  // of the first frame
}

// newTimeline sorts the ledger; nil where no frame has a time.
func newTimeline(l product.Ledger) *timeline {
	t := &timeline{first: math.Inf(1), last: math.Inf(-1), zero: math.NaN()}
	var day time.Time
	starts := make([]time.Time, len(l))
	for i, e := range l {
		start, err := time.Parse(dateLayout, e.DateObs) // takes fractions of a second too
		if err != nil {
			continue
		}
		starts[i] = start
		if day.IsZero() || start.Before(day) {
			day = start
		}
	}
	if day.IsZero() {
		return nil
	}
	t.date, day = day.Format(time.DateOnly), day.Truncate(24*time.Hour)
	for i, e := range l {
		name := e.Kind
		if e.Step == 0 {
			name = "of no step"
		}
		k := t.laneOf(name)
		if starts[i].IsZero() {
			if e.File == "" {
				t.lanes[k].missing++
			}
			continue
		}
		at, long := starts[i].Sub(day).Hours(), 0.0
		if !math.IsNaN(e.ExptimeS) {
			long = e.ExptimeS / 3600
		}
		t.first, t.last = min(t.first, at), max(t.last, at+long)
		t.lanes[k].frames = append(t.lanes[k].frames, frameAt{at + long/2, e.Verdict.Used()})
		if e.Kind == string(sequence.Science) && e.Verdict.Used() && !(t.zero <= at+long/2) {
			t.zero = at + long/2
		}
	}
	return t
}

// laneOf is the index of a kind's lane.
func (t *timeline) laneOf(name string) int {
	i := slices.IndexFunc(t.lanes, func(l lane) bool { return l.name == name })
	if i < 0 {
		i = len(t.lanes)
		t.lanes = append(t.lanes, lane{name: name})
	}
	return i
}

// drawTimeline draws the ledger over time, with the throughput of the science frames and its
// errors; "" where no frame has a time.
func drawTimeline(l product.Ledger, curves []Curve) template.HTML {
	t := newTimeline(l)
	if t == nil {
		return ""
	}
	if len(curves) == 0 {
		curves = ledgerCurve(l, t)
	}
	low, high := throughputSpan(curves)
	c := newChart("Frames and throughput over the night", "UTC on "+t.date+", hours", "throughput", t.first, t.last, low, high)
	c.left = timelineLeft
	lanes := laneHeight * float64(len(t.lanes))
	for i, lane := range t.lanes {
		t.drawLane(c, lane, chartTop+laneHeight*(float64(i)+0.5))
	}
	if low == high { // no throughput: the axis stands under the lanes
		c.bottom = chartTop + lanes + 4
		c.yTick, c.yName = nil, ""
		c.axes()
		c.height = c.bottom + chartBottom
		return c.done()
	}
	var plot drawing.SVG
	plot, c.SVG = c.SVG, drawing.SVG{}
	c.bottom = chartTop + throughputPlot
	c.axes()
	c.level(1)
	t.drawCurves(c, curves)
	c.height = lanes + throughputGap + c.bottom + chartBottom
	body := plot.String() + fmt.Sprintf(`<g transform="translate(0 %s)">`, drawing.Coord(lanes+throughputGap)) + c.String() + "</g>"
	return wrapSVG("chart", c.label, chartWidth, c.height, body)
}

// drawLane draws a tick a frame, and a cross over those that were not used.
func (t *timeline) drawLane(c *chart, l lane, y float64) {
	c.Text("end", c.left-8, y+4, l.name)
	c.Line("grid", c.left, y, chartWidth-chartRight, y)
	c.WriteString(`<path class="frame-used" d="`)
	for _, f := range l.frames {
		if f.used {
			fmt.Fprintf(c, "M%s,%sv%s", drawing.Coord(c.x(f.at)), drawing.Coord(y-laneTick/2), drawing.Coord(laneTick))
		}
	}
	c.WriteString(`"/>`)
	for _, f := range l.frames {
		if !f.used {
			mark(&c.SVG, "cross", c.x(f.at), y, 4)
		}
	}
	if l.missing > 0 {
		c.WriteString(`<g class="label">`)
		c.Text("end", chartWidth-chartRight-3, y+4, fmt.Sprintf("%d missing", l.missing))
		c.WriteString("</g>")
	}
}

// ledgerCurve is the throughput that the ledger holds.
func ledgerCurve(l product.Ledger, t *timeline) []Curve {
	c := Curve{Method: "together"}
	for _, e := range l {
		start, err := time.Parse(dateLayout, e.DateObs)
		if err != nil || math.IsNaN(e.Throughput) || math.IsNaN(e.ThroughputErr) || math.IsNaN(t.zero) {
			continue
		}
		day, _ := time.Parse(time.DateOnly, t.date) // as it was written
		at := start.Sub(day).Hours()
		if !math.IsNaN(e.ExptimeS) {
			at += e.ExptimeS / 7200
		}
		c.Minutes, c.C, c.Err = append(c.Minutes, 60*(at-t.zero)), append(c.C, e.Throughput), append(c.Err, e.ThroughputErr)
	}
	if len(c.C) == 0 {
		return nil
	}
	return []Curve{c}
}

// throughputSpan is the range of all curves with their errors; equal ends for none.
func throughputSpan(curves []Curve) (low, high float64) {
	var ends []float64
	for _, c := range curves {
		for i := range c.C {
			if c.known(i) {
				ends = append(ends, c.C[i]-c.Err[i], c.C[i]+c.Err[i])
			}
		}
	}
	if len(ends) == 0 {
		return 1, 1
	}
	return span([]float64{0.99, 1.01}, ends)
}

// drawCurves draws each method with a mark of its own, those named above the plot.
func (t *timeline) drawCurves(c *chart, curves []Curve) {
	zero := t.zero
	if math.IsNaN(zero) {
		zero = t.first
	}
	legend := c.left + 4
	for k, curve := range curves[:min(len(curves), mostNamedCurves+1)] {
		kind := marks[k%len(marks)]
		for i := range curve.C {
			if curve.known(i) {
				at := zero + curve.Minutes[i]/60
				c.errorBar("error", at, curve.C[i], curve.Err[i])
				mark(&c.SVG, kind, c.x(at), c.y(curve.C[i]), 2)
			}
		}
		mark(&c.SVG, kind, legend+4, chartTop-8, 3)
		c.Text("start", legend+12, chartTop-4, curve.Method)
		legend += 26 + 8.5*float64(len(curve.Method))
	}
}
