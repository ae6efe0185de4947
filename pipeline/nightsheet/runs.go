package nightsheet

import (
	"fmt"

	"mirrorloom/pipeline/sequence"
)

// Run is steps behind each other that are alike.
type Run struct {
	First int           `json:"first_step"`
	Last  int           `json:"last_step"`
	Kind  sequence.Kind `json:"kind"`
	// What says in words what the mirrors do.
	What     string  `json:"what"`
	Lamp     string  `json:"lamp,omitempty"`
	Dwell    float64 `json:"exptime_s"`
	StartUTC string  `json:"start_utc"`
	// Minutes is how long it takes, reading included.
	Minutes float64 `json:"minutes"`

	begin, end float64 // seconds since the start
}

// fineness is how much runs are joined.
type fineness int

const (
	// everyRun joins steps of one kind, lamp, exposure and cycle.
	everyRun fineness = iota
	// cycleRuns takes the all-off frames among a cycle's science steps to them.
	cycleRuns
	// nightRuns joins all cycles of a kind as well.
	nightRuns
)

// runsOf compresses the steps.
func runsOf(s *sequence.Sequence, steps []StepAt, how fineness) []Run {
	type key struct {
		kind  sequence.Kind
		lamp  string
		dwell float64
		cycle int
		coded bool
	}
	keys := make([]key, len(steps))
	cycle := 1
	for i, st := range steps {
		k := key{st.Kind, st.Lamp, st.Dwell, st.Cycle, st.CodeRow >= 0}
		if st.Kind == sequence.Science {
			cycle = st.Cycle
		}
		if how >= cycleRuns && st.Kind == sequence.AllOff {
			k.kind, k.cycle, k.coded = sequence.Science, cycle, true
		}
		if how == nightRuns {
			k.cycle = 0
		}
		keys[i] = k
	}
	var runs []Run
	for i := 0; i < len(steps); {
		end := i + 1
		for end < len(steps) && keys[end] == keys[i] {
			end++
		}
		runs = append(runs, newRun(s, steps[i:end], keys[i].kind))
		i = end
	}
	return runs
}

func newRun(s *sequence.Sequence, steps []StepAt, kind sequence.Kind) Run {
	first, last := &steps[0], &steps[len(steps)-1]
	return Run{
		First: first.Step, Last: last.Step, Kind: kind, Lamp: first.Lamp, Dwell: first.Dwell, StartUTC: first.StartUTC,
		What: what(s, steps, kind), Minutes: (last.end - first.seconds) / 60, begin: first.seconds, end: last.end,
	}
}

// what the mirrors do in a run.
func what(s *sequence.Sequence, steps []StepAt, kind sequence.Kind) string {
	t := s.Target
	switch kind {
	case sequence.Bias:
		return "no exposure, all mirrors off"
	case sequence.Dark:
		return "shutter closed, all mirrors off"
	case sequence.AllOff:
		return "on the sky, all mirrors off"
	case sequence.AllOn:
		return "on the sky, all elements on"
	case sequence.Arc:
		if t.Calibration.Arc.Every > 1 {
			return fmt.Sprintf("single elements, every %s and the last, one by one", ordinal(t.Calibration.Arc.Every))
		}
		return "single elements, one by one"
	case sequence.RefStar:
		if r := t.Calibration.RefStar; r != nil {
			return fmt.Sprintf("elements %d to %d on, on the reference star", r.Elements[0], r.Elements[1])
		}
	case sequence.Flat:
		if steps[0].CodeRow < 0 {
			return "all elements on, the even, the odd, none, in turn"
		}
	}
	return codedWords(s, steps)
}

// codedWords are about code rows, with the all-off frames among them.
func codedWords(s *sequence.Sequence, steps []StepAt) string {
	coded, off, first, last := 0, 0, 0, 0
	for _, st := range steps {
		if st.CodeRow < 0 {
			off++
			continue
		}
		if coded == 0 {
			first = st.Cycle
		}
		coded, last = coded+1, st.Cycle
	}
	text := fmt.Sprintf("cycle %d", first)
	if last > first {
		text = fmt.Sprintf("cycles %d to %d", first, last)
	}
	text += fmt.Sprintf(": %d code rows", coded)
	if off > 0 {
		text += fmt.Sprintf(", %d all-off, one after every %d", off, s.Target.AllOffEvery)
	}
	return text
}

func ordinal(n int) string {
	switch {
	case n == 2:
		return "second"
	case n%10 == 2 && n%100 != 12:
		return fmt.Sprintf("%dnd", n)
	case n%10 == 1 && n%100 != 11:
		return fmt.Sprintf("%dst", n)
	case n%10 == 3 && n%100 != 13:
		return fmt.Sprintf("%drd", n)
	}
	return fmt.Sprintf("%dth", n)
}
