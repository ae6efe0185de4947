package nightsheet

import (
	"math"

	"mirrorloom/pipeline/nightsheet/typeface"
)

// The paper and the sizes of words, points. Nothing is smaller than 7 points, the least that
// is read easily on paper at arm's length (common practice, no source).
const (
	pageWidth   = 538 // of 595.3, A4's, less margins of 10 mm
	pageHeight  = 784 // of 841.9, less margins of 10 mm
	columnGap   = 16
	columnWidth = (pageWidth - columnGap) / 2
	textPoints  = 7.8
	lineHeight  = 9.8
	rowPad      = 1.2 // above and below together, of a row of a table
	headHeight  = 17  // of a block's heading
	blockGap    = 5
)

// layout is the page while it is laid out.
type layout struct {
	sheet         *Sheet
	regular, bold *typeface.Face
	// crowded: the first page has no room for spectra.
	crowded bool
}

func newLayout(s *Sheet) (*layout, error) {
	regular, err := typeface.Regular()
	if err != nil {
		return nil, err
	}
	bold, err := typeface.Bold()
	if err != nil {
		return nil, err
	}
	return &layout{sheet: s, regular: regular, bold: bold}, nil
}

// fact is a line of a table of two columns.
type fact struct{ Name, Value string }

const factName = 62 // the width of names

// factsHeight is that of such a table in a width.
func (l *layout) factsHeight(facts []fact, width float64) float64 {
	sum := 0.0
	for _, f := range facts {
		lines := max(len(l.regular.Wrap(f.Name, textPoints, factName-4)), len(l.regular.Wrap(f.Value, textPoints, width-factName-2)))
		sum += float64(lines)*lineHeight + rowPad
	}
	return sum
}

// paragraph is the height of words in a width.
func (l *layout) paragraph(words string, width float64) float64 {
	return float64(len(l.regular.Wrap(words, textPoints, width-2))) * lineHeight
}

// cutList is the items of a list that fit a height, each shortened to so many lines, and how
// many are left out; one line is kept to say so.
func (l *layout) cutList(items []string, width, height float64, mostLines int) (kept []string, left int) {
	used := 0.0
	for i, item := range items {
		lines := l.regular.Wrap(item, textPoints, width-2)
		if len(lines) > mostLines {
			item = l.regular.Fit(item, textPoints, (width-2)*float64(mostLines)*0.97-20)
			lines = l.regular.Wrap(item, textPoints, width-2)
		}
		needed := float64(len(lines))*lineHeight + rowPad
		reserve := 0.0
		if i < len(items)-1 {
			reserve = lineHeight + rowPad
		}
		if used+needed+reserve > height {
			return kept, len(items) - i
		}
		used += needed
		kept = append(kept, item)
	}
	return kept, 0
}

// rowsIn is how many rows of a height fit.
func rowsIn(height, row float64) int { return max(0, int(math.Floor(height/row))) }
