package reduce

import (
	"math"
	"slices"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// leakRow tells whether a detector row serves the fit of the leak, whether mirrors
// reach it, and how many elements' widths of mirrors lie beyond the field on both sides
// of it.
type leakRow struct {
	use, lit      bool
	before, after float64
}

// leakRows leaves out rows that closed mirrors or the device's ends reach: closed
// mirrors leak as others do, but no decoded light tells how much falls on them, and
// taken for rows without light they would pass the leak off as a pedestal.
func (r *reduction) leakRows() []leakRow {
	p, seq, g := r.seq.Profile, r.seq, &r.optics.geometry
	columns := seq.ElementColumns()
	first, last := seq.Elements[columns[0]], seq.Elements[columns[len(columns)-1]]
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
		row := &rows[y]
		if row.use, row.lit = coded || bare, coded; coded {
			from, to := uRangeOf(p, mirrorRow(p, float64(y)))
			width := float64(seq.ElementMirrors())
			row.before = max(0, float64(first.First-from)/width)
			row.after = max(0, float64(to-last.Last)/width)
		}
	}
	return rows
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
