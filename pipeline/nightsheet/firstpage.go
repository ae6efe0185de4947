package nightsheet

import "fmt"

const (
	titleHeight   = 39
	verdictPoints = 10.5
	verdictLine   = 13.5
	verdictPad    = 14
	timeRow       = lineHeight + rowPad
	captionHeight = 10
	leastMap      = 210 // of the field's drawing
	nightPad      = 5
	tableRules    = 4 // lines in the column's tables, and what rounding to pixels adds
	leastWanted   = 6 // of what is wanted, before warnings take the room
	listIndent    = 12
	longWarning   = 9 // lines, where there is room
	shortWarning  = 3
)

// first lays out page 1: two columns as high as the left one needs, the right one's warnings
// as far as the drawing of the field leaves room; the forecast in what is left.
func (l *layout) first(p *page) {
	s := l.sheet
	verdict := len(l.bold.Wrap(s.Verdict, verdictPoints, pageWidth-22))
	left := pageHeight - titleHeight - verdictPad - verdictLine*float64(verdict)
	if s.Trade != nil {
		p.Advice = l.shorten(s.Trade.Recommendation, pageWidth, 2)
		left -= l.paragraph(p.Advice, pageWidth) + blockGap
	}
	p.Times, p.Data = s.times(), s.data()
	p.Night = l.drawNight(columnWidth)
	column := l.facts(p, 3)
	if column > left-l.forecastLeast() {
		column = l.facts(p, 2)
	}
	l.crowded = column > left-l.forecastLeast()
	column = max(column, l.rightNeeds())
	column = min(column, left-l.forecastLeast())
	p.LeftHeight = coord(column)
	l.right(p, column)
	l.forecast(p, left-column-blockGap)
}

// facts fills in the facts of the left column, in so many lines each at most, and gives the
// column's height.
func (l *layout) facts(p *page, lines int) float64 {
	p.Where, p.Limits = l.sheet.where(), l.sheet.limits()
	for _, list := range [][]fact{p.Where, p.Limits} {
		for i := range list {
			list[i].Value = l.shorten(list[i].Value, columnWidth-factName, lines)
		}
	}
	return 3*headHeight + tableRules + l.factsHeight(p.Where, columnWidth) + l.factsHeight(p.Limits, columnWidth) +
		timeRow*float64(len(p.Times)+1) + nightHeight + nightPad + l.paragraph(p.Data, columnWidth)
}

// rightNeeds is the height of the right column with all warnings.
func (l *layout) rightNeeds() float64 {
	height := headHeight + leastMap + l.paragraph(l.fieldNote(), columnWidth) + 2
	for i, w := range l.sheet.warnings() {
		if i == 0 {
			height += headHeight
		}
		height += l.paragraph(w, columnWidth-listIndent) + rowPad
	}
	return height
}

// right is the right column: warnings, then the field.
func (l *layout) right(p *page, height float64) {
	p.FieldNote = l.fieldNote()
	height -= headHeight + l.paragraph(p.FieldNote, columnWidth) + 2
	if w := l.sheet.warnings(); len(w) > 0 {
		room := height - headHeight - leastMap
		p.Warned, p.MoreWarnings = l.cutList(w, columnWidth-listIndent, room, longWarning)
		if p.MoreWarnings > 0 { // rather all of them in few lines each
			p.Warned, p.MoreWarnings = l.cutList(w, columnWidth-listIndent, room, shortWarning)
		}
		height -= headHeight
		for _, item := range p.Warned {
			height -= l.paragraph(item, columnWidth-listIndent) + rowPad
		}
		if p.MoreWarnings > 0 {
			height -= lineHeight + rowPad
		}
	}
	p.Sky = l.drawSky(columnWidth, height)
}

// forecastLeast is the height that the forecast takes at least.
func (l *layout) forecastLeast() float64 {
	f := l.sheet.Forecast
	if f == nil || len(f.Wanted) == 0 {
		return 0
	}
	height := headHeight + snrHeight(min(len(f.Wanted), leastWanted)) + 2*captionHeight + blockGap
	if hasSpectra(f) && !l.crowded {
		height += spectrumHeight + captionHeight + blockGap
	}
	return height
}

// forecast lays out the forecast in a height: the more measurements, the more room.
func (l *layout) forecast(p *page, height float64) {
	f := l.sheet.Forecast
	if f == nil || len(f.Wanted) == 0 {
		return
	}
	if hasSpectra(f) && !l.crowded {
		p.Spectra = l.drawSpectra(pageWidth)
		height -= spectrumHeight + captionHeight + blockGap
	}
	n := min(len(f.Wanted), rowsIn(height-headHeight-2*captionHeight-snrHeight(0), snrRow))
	p.SNR, p.MoreWanted = l.drawSNR(pageWidth, n), len(f.Wanted)-n
}

// shorten cuts words to so many lines of a width.
func (l *layout) shorten(words string, width float64, lines int) string {
	if len(l.regular.Wrap(words, textPoints, width-2)) <= lines {
		return words
	}
	return l.regular.Fit(words, textPoints, (width-2)*float64(lines)*0.95-16)
}

// fieldNote is the caption of the field's drawing.
func (l *layout) fieldNote() string {
	s := l.sheet
	text := fmt.Sprintf("North up, east left. Position angle %s°: the slit's direction (elements are strips along it).", number(s.Center.PositionAngleDeg))
	switch {
	case s.sequence.Target.Forecast == nil:
		return text + " The target has no forecast: no sources to show."
	case len(s.Footprint.Marks) > 0:
		return text + " Letters: as in the forecast below."
	}
	return text
}
