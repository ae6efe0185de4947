package reduce

import (
	"fmt"

	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/sequence"
)

// lamps are the frames of the flats' lamp by what the mirrors show, and their
// exposure time in seconds.
type lamps struct {
	on, even, odd, off []*exposure.Frame
	coded              [][]*exposure.Frame // by code row; nil without a coded cycle
	seconds            float64
}

// add sorts in a frame of a lamp; one that shows anything else is left out.
func (l *lamps) add(seq *sequence.Sequence, f *exposure.Frame) error {
	step := seq.Steps[f.Step]
	pattern, row := seq.Pattern(f.Step)
	switch pattern {
	case sequence.PatternOn:
		l.on = append(l.on, f)
	case sequence.PatternEven:
		l.even = append(l.even, f)
	case sequence.PatternOdd:
		l.odd = append(l.odd, f)
	case sequence.PatternOff:
		l.off = append(l.off, f)
	case sequence.PatternRow:
		if l.coded == nil {
			l.coded = make([][]*exposure.Frame, seq.V)
		}
		l.coded[row] = append(l.coded[row], f)
	default:
		return nil
	}
	if l.seconds != 0 && l.seconds != step.ExptimeSeconds {
		return fmt.Errorf("the sequence has flat steps of %g s and of %g s; plan them all of one exposure time", l.seconds, step.ExptimeSeconds)
	}
	l.seconds = step.ExptimeSeconds
	return nil
}

// lost lists the code rows of the coded cycle without a frame.
func (l *lamps) lost() []int {
	var rows []int
	for row, frames := range l.coded {
		if len(frames) == 0 {
			rows = append(rows, row)
		}
	}
	return rows
}

// all lists every frame, coded ones in the order of their rows.
func (l *lamps) all() []*exposure.Frame {
	var all []*exposure.Frame
	for _, list := range [][]*exposure.Frame{l.on, l.even, l.odd, l.off} {
		all = append(all, list...)
	}
	for _, list := range l.coded {
		all = append(all, list...)
	}
	return all
}
