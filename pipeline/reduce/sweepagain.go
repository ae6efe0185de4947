package reduce

// A sweep that goes on where an earlier one ended decodes again the rows that the next
// trace rows need. What they give is the same, and is neither written nor counted twice.

// extent is how far a sweep came at the end of a strip.
type extent struct {
	decoded  int // detector rows
	finished int // detector rows fit for rectifying, whose variances are written
	nextOut  int // trace rows written
}

// firstAgain is the first row to decode. The rows before those that are needed show what
// bleeds into them and what light of stuck mirrors they lack.
func (w *sweep) firstAgain() int {
	b := w.before
	if w.rectify == nil || b.decoded == 0 || b.nextOut == w.shape.rows {
		return b.decoded
	}
	return max(0, min(w.rectify.needs(b.nextOut), b.finished)-max(1, w.ahead()))
}

// isAgain tells a row that an earlier sweep decoded.
func (w *sweep) isAgain(y int) bool { return y < w.before.decoded }

// spans are the rows of the strips in their order. None has both rows that an earlier
// sweep decoded and new ones.
func (w *sweep) spans() [][2]int {
	var all [][2]int
	for _, part := range [][2]int{{w.firstAgain(), w.before.decoded}, {w.before.decoded, w.shape.rows}} {
		for y0 := part[0]; y0 < part[1]; y0 += w.heights.strip {
			all = append(all, [2]int{y0, min(y0+w.heights.strip, part[1])})
		}
	}
	return all
}

// bound ends a strip.
func (w *sweep) bound(s *strip) error {
	if w.isAgain(s.y0) {
		return nil
	}
	w.reader.tally.addSaturated(s)
	if w.boundary == nil {
		return nil
	}
	return w.boundary(s.y1)
}
