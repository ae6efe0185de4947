package nightsheet

import (
	"fmt"

	"mirrorloom/pipeline/plan"
)

// runRow is a line of the table of steps.
type runRow struct{ Steps, Count, Kind, What, Lamp, Dwell, Start, Minutes string }

// sizeRow is a line about calibrations.
type sizeRow struct{ Kind, Planned, Needed, Verdict string }

// deviceRow is a line about the device's optics.
type deviceRow struct{ NM, Spot, In, Order, Taken, Neighbour, Contrast, Leak string }

const (
	pageTwoHead = 22
	stepRow     = lineHeight + 2.5
	whatWidth   = 208 // of the column of words in the table of steps
	sizeWidth   = 370 // of the verdicts on calibrations
	leastNotes  = 120
	mostDevice  = 7
)

// caution is said wherever lamps are planned.
const caution = "Caution: calibration lamps are hot and bright and may give off ultraviolet light, and their supplies, as well as those of some detectors, carry high voltage. Follow the makers' cautions and your observatory's rules, which come before this sheet; change nothing on powered equipment."

// second lays out page 2: what is fixed, then the steps in what is left, the notes in the rest.
func (l *layout) second(p *page) {
	p.Caution = caution
	left := pageHeight - pageTwoHead - l.paragraph(caution, pageWidth-12) - 8 - blockGap
	l.sizes(p)
	left -= headHeight + blockGap + stepRow
	if p.SizesNote != "" {
		left -= l.paragraph(p.SizesNote, pageWidth)
	}
	for _, r := range p.Sizes {
		left -= l.paragraph(r.Verdict, sizeWidth) + 2.2
	}
	column := l.device(p)
	left -= column + blockGap + headHeight + stepRow
	l.steps(p, left)
	left -= stepRow*float64(len(p.Table)) + l.paragraph(p.TableNote, pageWidth)
	p.NotesHeight = coord(column + max(0, left))
}

// sizes fills the table of calibrations.
func (l *layout) sizes(p *page) {
	for _, c := range l.sheet.Calibrations {
		unit := map[string]string{"flat": " coded cycles", "arc": " each"}[string(c.Kind)]
		p.Sizes = append(p.Sizes, sizeRow{string(c.Kind), fmt.Sprint(c.Planned) + unit, fmt.Sprint(c.Needed), l.shorten(c.Verdict, sizeWidth, 2)})
	}
	if len(p.Sizes) == 0 {
		p.SizesNote = "Whether they are enough cannot be said without a forecast of what is wanted: " + plannedWords(l.sheet) + "."
		return
	}
	p.SizesNote = fmt.Sprintf("Needed: what keeps the noise that calibrations add, L/N of a level and R/E of lamp light (see the program's documentation), below %.0f %% of the forecast's. Bias and dark frames also show bad pixels, which this does not count.", 100*plan.MostAdded)
}

// plannedWords lists the calibrations that are planned.
func plannedWords(s *Sheet) string {
	text := ""
	for _, k := range s.Kinds {
		if k.Kind == "science" {
			continue
		}
		if text != "" {
			text += ", "
		}
		text += fmt.Sprintf("%s %d", k.Kind, k.Steps)
	}
	if text == "" {
		return "none are planned"
	}
	return "planned are " + text
}

// device fills masks and device optics, and gives the height of their column.
func (l *layout) device(p *page) float64 {
	s := l.sheet
	height := headHeight + l.paragraph(s.Loading.Words, columnWidth) + blockGap
	d := s.Device
	if d == nil {
		return max(height, leastNotes)
	}
	p.DeviceNote = fmt.Sprintf("Half-angle of the beam %.2f°; lines of mirrors %.2f µm apart along the dispersion; an element is %.2f µm wide.", d.HalfAngleDeg, d.AcrossUM, d.ElementUM)
	for _, a := range thinned(d.At, mostDevice) {
		p.DeviceRows = append(p.DeviceRows, deviceRow{
			fmt.Sprintf("%.1f", a.WavelengthNM), fmt.Sprintf("%.1f", a.SpotUM), fmt.Sprintf("%.0f %%", 100*a.SpotInElement), fmt.Sprintf("%.2f", a.BlazeOrder),
			fmt.Sprintf("%.0f %%", 100*a.Taken), fmt.Sprintf("%+.2f %%", 100*a.Neighbour), fmt.Sprintf("%.0f", a.Contrast), fmt.Sprintf("%.1e", a.Pedestal),
		})
	}
	height += headHeight + l.paragraph(p.DeviceNote, columnWidth) + 2*lineHeight + stepRow*float64(len(p.DeviceRows)) + blockGap
	return max(height, leastNotes)
}

// thinned keeps n of a list, the first and the last among them.
func thinned(list []plan.DeviceAt, n int) []plan.DeviceAt {
	if len(list) <= n {
		return list
	}
	var kept []plan.DeviceAt
	for i := range n {
		kept = append(kept, list[i*(len(list)-1)/(n-1)])
	}
	return kept
}

// steps fills the table of steps: as fine as fits, and as far as it does.
func (l *layout) steps(p *page, height float64) {
	s := l.sheet
	room := rowsIn(height-2*lineHeight, stepRow) // the note has two lines at most
	var runs []Run
	for how := everyRun; how <= nightRuns; how++ {
		runs = runsOf(s.sequence, s.Steps, how)
		if len(runs) <= room {
			break
		}
	}
	left := max(0, len(runs)-room)
	for _, r := range runs[:len(runs)-left] {
		steps := fmt.Sprint(r.First)
		if r.Last > r.First {
			steps = fmt.Sprintf("%d–%d", r.First, r.Last)
		}
		p.Table = append(p.Table, runRow{
			steps, fmt.Sprint(r.Last - r.First + 1), string(r.Kind), l.regular.Fit(r.What, textPoints, whatWidth), r.Lamp,
			number(r.Dwell), clock(r.StartUTC, s.StartUTC), fmt.Sprintf("%.1f", r.Minutes),
		})
	}
	p.TableNote = fmt.Sprintf("Start: UTC, when all goes as planned. Each step by itself, with its MASKID, is in table STEPS of sequence.fits and in %s.", JSONFile)
	if left > 0 {
		p.TableNote = fmt.Sprintf("%d more lines in %s. %s", left, JSONFile, p.TableNote)
	}
}
