package plan

import (
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// optics answers where light falls on the detector, as far as planning needs:
// x along the dispersion in active pixels from 0, a pixel reaching half a pixel
// to both sides.
type optics struct {
	profile *instrument.Profile
	mirrors int // of an element
	deviceU int // number of u
	offsetU int // of the field's middle from the device's
	// wFirst and wLast bound the rows that are not closed for all elements.
	wFirst, wLast int
	// band is where the grid's voxels begin and end in x relative to the
	// centre wavelength, slit the shift of x over the rows seen.
	band, slit extent
}

// extent is a range of x, px.
type extent struct{ low, high float64 }

func (e *extent) take(x float64) { e.low, e.high = min(e.low, x), max(e.high, x) }

func empty() extent { return extent{math.Inf(1), math.Inf(-1)} }

func newOptics(p *instrument.Profile, t *sequence.Target) *optics {
	uFirst, uLast := p.URange()
	o := &optics{profile: p, mirrors: t.Code.ElementMirrors, deviceU: uLast - uFirst + 1, offsetU: t.OffsetU(), band: empty()}
	o.wFirst, o.wLast = openRows(p, t)
	for i := range p.Grid.Count + 1 {
		o.band.take(o.dispersion(p.Grid.WavelengthNM(float64(i) - 0.5)))
	}
	s := p.Spectrograph
	q0, q1 := o.rowsSeen()
	o.slit = rangeOf(s.SlitTilt, s.SmilePerPx, q0, q1)
	return o
}

// openRows is the range of w between the rows that the target closes for all
// elements at the device's ends; it is empty (first > last) if it closes all.
func openRows(p *instrument.Profile, t *sequence.Target) (first, last int) {
	wFirst, wLast := p.WRange()
	first, last = wLast+1, wFirst-1
	for _, r := range t.RowRanges(wFirst, wLast) {
		if r.Use != sequence.UseClosed {
			first, last = min(first, r.First), max(last, r.Last)
		}
	}
	return first, last
}

// dispersion is x of a vacuum wavelength relative to that of the centre.
func (o *optics) dispersion(wavelengthNM float64) float64 {
	l := wavelengthNM - o.profile.Spectrograph.CenterNM
	d := o.profile.Spectrograph.DispersionPxPerNM
	return l * (d[0] + l*(d[1]+l*d[2]))
}

// rowsSeen is the range of q = y - y_c of the detector rows that mirrors light.
func (o *optics) rowsSeen() (q0, q1 float64) {
	s := o.profile.Spectrograph
	bottom, top := -s.YCenterPx, float64(o.profile.Detector.Rows-1)-s.YCenterPx
	return max(o.row(float64(o.wFirst)), bottom), min(o.row(float64(o.wLast)), top)
}

// row is q of the centre of mirror row w.
func (o *optics) row(w float64) float64 {
	return (w - o.profile.WCenter()) * o.profile.Spectrograph.WStepPx
}

// checkRowsSeen refuses a target of which the detector sees no row.
func (o *optics) checkRowsSeen() error {
	if q0, q1 := o.rowsSeen(); o.wFirst > o.wLast || q0 > q1 {
		return refuse("closed", "no open mirror row falls on the detector; leave some of its rows open")
	}
	return nil
}

// rangeOf is the range of a q + b q^2 for q in q0..q1.
func rangeOf(a, b, q0, q1 float64) extent {
	e := empty()
	e.take(q0 * (a + b*q0))
	e.take(q1 * (a + b*q1))
	if vertex := -a / (2 * b); vertex > q0 && vertex < q1 { // false when b is 0
		e.take(vertex * (a + b*vertex))
	}
	return e
}

// field is the first and the last u of n elements.
func (o *optics) field(n int) (first, last int) {
	width := n * o.mirrors
	first = o.profile.FieldFirstU(width, o.offsetU)
	return first, first + width - 1
}

// onDevice tells whether the device has all u of n elements.
func (o *optics) onDevice(n int) bool {
	uFirst, uLast := o.profile.URange()
	first, last := o.field(n)
	return first >= uFirst && last <= uLast
}

// elementsWithWholeBand is the largest number of elements on the device of which each has
// every voxel of the grid on the detector, in every row; 0 for none.
func (o *optics) elementsWithWholeBand() int {
	right := float64(o.profile.Detector.Columns) - 0.5
	return most(func(n int) bool {
		return o.onDevice(n) && o.column(0, n)+o.band.low+o.slit.low >= -0.5 && o.column(n-1, n)+o.band.high+o.slit.high <= right
	})
}

// most is the largest n from 1 on up to which all fit: wider fields reach further to both
// sides.
func most(fits func(n int) bool) int {
	n := 0
	for fits(n + 1) {
		n++
	}
	return n
}

// column is x of the centre wavelength of element j of n on the row y_c.
func (o *optics) column(j, n int) float64 {
	across := float64(o.offsetU) + float64(o.mirrors)*(float64(j)-float64(n-1)/2) // mirrors
	return o.profile.Spectrograph.XCenterPx + o.profile.Spectrograph.UStepPx*across
}

// bandSeen is the fraction of the grid's voxels whose centre lies on the
// detector for element j of n, on the row y_c.
func (o *optics) bandSeen(j, n int) float64 {
	at := o.column(j, n)
	seen := 0
	for i := range o.profile.Grid.Count {
		x := at + o.dispersion(o.profile.Grid.WavelengthNM(float64(i)))
		if x > -0.5 && x < float64(o.profile.Detector.Columns)-0.5 {
			seen++
		}
	}
	return float64(seen) / float64(o.profile.Grid.Count)
}

// checkField refuses a field whose edge elements the detector does not see, or whose edge
// strips have no mirror in the open rows.
func (o *optics) checkField(n int) error {
	key, cure := "code", "give fewer or narrower elements"
	if o.offsetU != 0 {
		key, cure = "field.offset_u", "bring the field nearer to the device's middle, or give fewer or narrower elements"
	}
	first, last := o.field(n)
	for _, edge := range [][2]int{{0, first + o.mirrors - 1}, {n - 1, last - o.mirrors + 1}} {
		j, u := edge[0], edge[1] // the u nearest to the field's middle
		if o.bandSeen(j, n) == 0 {
			return refuse(key, "the detector's %d columns hold no wavelength of the grid for element %d of %d; %s", o.profile.Detector.Columns, j, n, cure)
		}
		if wFirst, wLast := o.stripEnds(u); wFirst > wLast {
			return refuse(key, "element %d of %d lies in the device's corner and has no mirror in the rows that are open; %s", j, n, cure)
		}
	}
	return nil
}

// stripEnds are the first and the last w, of those open, that the mirrors of u reach; first
// > last for none.
func (o *optics) stripEnds(u int) (first, last int) {
	d := o.profile.DMD
	if d.Mounting != instrument.Diagonal {
		return o.wFirst, o.wLast
	}
	// w = row - column = u - 2 column.
	return max(o.wFirst, u-2*min(u, d.Columns-1)), min(o.wLast, u-2*max(0, u-(d.Rows-1)))
}

// stripRows is the height, in detector rows, of what the mirrors of u light,
// and of what the open rows w light in all: in the diagonal mounting strips
// shorten towards the device's corners.
func (o *optics) stripRows(u int) (reached, seen float64) {
	q0, q1 := o.rowsSeen()
	seen = q1 - q0
	first, last := o.stripEnds(u)
	return max(0, min(q1, o.row(float64(last)))-max(q0, o.row(float64(first)))), seen
}
