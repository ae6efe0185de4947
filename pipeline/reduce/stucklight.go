package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/sequence"
)

// Pixels mix some mirror rows, and the light of one that does not move differs from that
// of the others where a source is small: no factor gives an element its light back.
// What is missing is estimated, pixel by pixel, from the decoded light of the element and
// its neighbours within lightRows rows, by calib.MissingLight. Its prior is a field that
// is smooth over lightLength spots, its strength the scatter of that light.
const (
	lightRows     = 5
	lightElements = 1
	// lightLength is the correlation length in standard deviations of a spot: images are
	// no sharper than optics that are made for them.
	lightLength = 1.5
	// lightStep is how finely, in rows, the trace's shift is told apart by the weights;
	// sums of mirrors are those of the shift itself.
	lightStep = 0.25
	// lightScatter is how far elements' responses differ, which are not yet divided out.
	lightScatter = 0.02
)

// wholeElement is the light of an element in a row, with what its mirrors lack put in.
type wholeElement struct {
	element int
	// signal takes the place of the row's; extra is added to its variance.
	signal, extra []float32
}

// stuckLight restores the light of elements row by row.
type stuckLight struct {
	*stuckMirrors
	geometry *calib.Geometry
	trace    []float64 // by column
	shares   []float64 // RowShare every 1/shareSteps from -reach
	reach    float64
	length   float64 // of the correlation, in u
	uniform  bool
}

const shareSteps = 512

func newStuckLight(s *stuckMirrors, g *calib.Geometry, columns int, uniform bool) *stuckLight {
	if s == nil || !slices.ContainsFunc(s.elements, func(e stuckElement) bool { return len(e.missing) > 0 }) {
		return nil
	}
	p := s.seq.Profile
	l := &stuckLight{stuckMirrors: s, geometry: g, reach: spreadReach(p), uniform: uniform}
	for x := range columns {
		l.trace = append(l.trace, g.TraceShift(float64(x)))
	}
	for i := range int(2*l.reach*shareSteps) + 2 {
		l.shares = append(l.shares, calib.RowShare(float64(i)/shareSteps-l.reach, p.Spectrograph.LSFFWHMPx))
	}
	l.length = lightLength * p.Spectrograph.LSFFWHMPx / fwhmPerSigma / math.Abs(p.Spectrograph.WStepPx)
	return l
}

// share is calib.RowShare by the table.
func (l *stuckLight) share(d float64) float64 {
	at := (d + l.reach) * shareSteps
	if !(at >= 0 && at < float64(len(l.shares)-1)) {
		return 0
	}
	i := int(at)
	return l.shares[i] + (l.shares[i+1]-l.shares[i])*(at-float64(i))
}

// affected lists the elements that lack light in a detector row.
func (l *stuckLight) affected(y int) []int {
	if l == nil {
		return nil
	}
	low, high := bounds(l.trace)
	var list []int
	for j := range l.elements {
		if slices.ContainsFunc(l.elements[j].missing, func(m sequence.PlacedMirror) bool {
			d := float64(y) - l.row(m.W)
			return d-high < l.reach && d-low > -l.reach
		}) {
			list = append(list, j)
		}
	}
	return list
}

func bounds(x []float64) (low, high float64) { return slices.Min(x), slices.Max(x) }

// restore gives the element j of row y its light back from the rows of a window.
func (l *stuckLight) restore(w *window, y, j int) wholeElement {
	r := newStuckRow(l, w, y, j)
	r.measure()
	row := w.rows[y-w.first()]
	out := wholeElement{element: j, signal: slices.Clone(row.signal[j]), extra: make([]float32, len(l.trace))}
	add, extra := r.estimate()
	for x := range out.signal {
		out.signal[x] += float32(add[x])
		out.extra[x] = float32(extra[x])
	}
	return out
}
