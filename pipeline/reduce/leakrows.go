package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// leakRow tells whether a detector row serves the fit of the leak, and whether mirrors
// reach it.
type leakRow struct{ use, lit bool }

// leakRows leaves out rows that closed mirrors or the device's ends reach: closed
// mirrors leak as others do, but no decoded light tells how much falls on them, and
// taken for rows without light they would pass the leak off as a pedestal.
func (r *reduction) leakRows() []leakRow {
	p, seq, g := r.seq.Profile, r.seq, &r.optics.geometry
	columns := seq.ElementColumns()
	middle := seq.Elements[columns[len(columns)/2]]
	reach := p.Spectrograph.LSFFWHMPx
	for x := range r.camera.Columns {
		reach = max(reach, p.Spectrograph.LSFFWHMPx+math.Abs(g.TraceShift(float64(x))))
	}
	rows := make([]leakRow, r.camera.Rows)
	wFirst, wLast := p.WRange()
	for y := range rows {
		low, high := mirrorRow(p, float64(y)-reach), mirrorRow(p, float64(y)+reach)
		coded, bare := true, true
		for w := low; w <= high; w++ {
			coded = coded && rowFlags(seq, p, w, middle) == 0 && !slices.ContainsFunc(seq.Rows, func(r sequence.RowRange) bool {
				return r.Use == sequence.UseClosed && w >= r.First && w <= r.Last
			})
			bare = bare && (w < wFirst || w > wLast)
		}
		// Nor do those on which mirrors stuck on shine, which no mask closes.
		rows[y] = leakRow{use: (coded || bare) && !r.optics.stuck.shinesOn(y), lit: coded}
	}
	return rows
}

// beyondField is how many elements' worth of mirrors lie outside the field, below
// element 0 and above the last, by mirror row from wFirst on.
type beyondField struct {
	wFirst        int
	before, after []float64
}

// newBeyondField counts the mirrors of each row. In a diagonal device, rows hold every
// second u in turn, and one more or one less of them lies outside: neighbouring rows,
// which a pixel adds up, are averaged.
func newBeyondField(seq *sequence.Sequence) *beyondField {
	p, columns := seq.Profile, seq.ElementColumns()
	first, last := seq.Elements[columns[0]].First, seq.Elements[columns[len(columns)-1]].Last
	step := 1 // of u in a row
	if p.DMD.Mounting == instrument.Diagonal {
		step = 2
	}
	perElement := float64(seq.ElementMirrors()) / float64(step)
	wFirst, wLast := p.WRange()
	b := &beyondField{wFirst: wFirst}
	for w := wFirst; w <= wLast; w++ {
		from, to := uRangeOf(p, w)
		b.before = append(b.before, float64(max(0, first-from+step-1)/step)/perElement)
		b.after = append(b.after, float64(max(0, to-last+step-1)/step)/perElement)
	}
	b.before, b.after = averagedRows(b.before), averagedRows(b.after)
	return b
}

// averagedRows weighs each value with half its neighbours'.
func averagedRows(list []float64) []float64 {
	out := make([]float64, len(list))
	for i, v := range list {
		out[i] = v/2 + (list[max(i-1, 0)]+list[min(i+1, len(list)-1)])/4
	}
	return out
}

// row writes the numbers at each column of detector row y: the light there comes from
// the mirror row that the trace leads to.
func (b *beyondField) row(before, after []float64, p *instrument.Profile, g *calib.Geometry, y int) {
	for x := range before {
		i := mirrorRow(p, float64(y)-g.TraceShift(float64(x))) - b.wFirst
		i = min(max(i, 0), len(b.before)-1)
		before[x], after[x] = b.before[i], b.after[i]
	}
}

// uRangeOf is the first and last u of mirror row w: mounted diagonally, rows shorten
// towards the corners.
func uRangeOf(p *instrument.Profile, w int) (first, last int) {
	if p.DMD.Mounting != instrument.Diagonal {
		return p.URange()
	}
	if w >= 0 { // row = column + w
		return w, w + 2*min(p.DMD.Columns-1, p.DMD.Rows-1-w)
	}
	return -w, -w + 2*min(p.DMD.Rows-1, p.DMD.Columns-1+w)
}
