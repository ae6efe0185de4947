package nightsheet

import (
	"time"

	"mirrorloom/pipeline/sequence"
)

// StepAt is a step with its time, when all goes as planned.
type StepAt struct {
	Step    int           `json:"step"`
	Kind    sequence.Kind `json:"kind"`
	Lamp    string        `json:"lamp,omitempty"`
	Dwell   float64       `json:"exptime_s"`
	MaskID  string        `json:"maskid"`
	CodeRow int           `json:"code_row"`
	Cycle   int           `json:"cycle"`
	// StartUTC is when its exposure begins.
	StartUTC string  `json:"start_utc"`
	seconds  float64 // since the start
	end      float64 // with reading
}

// stepsOf lists all steps; between two lies what reading and loading a mask take.
func stepsOf(s *sequence.Sequence, start time.Time) []StepAt {
	list := make([]StepAt, len(s.Steps))
	overhead, at := s.Profile.OverheadS(), 0.0
	for i, st := range s.Steps {
		begin := start.Add(time.Duration(at * float64(time.Second))).Round(time.Second)
		list[i] = StepAt{st.Step, st.Kind, st.Lamp, st.ExptimeSeconds, st.MaskID, st.Row, st.Cycle, begin.UTC().Format(time.RFC3339), at, at + st.ExptimeSeconds + overhead}
		at = list[i].end
	}
	return list
}
