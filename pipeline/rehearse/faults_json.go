package rehearse

import (
	"encoding/json"

	"mirrorloom/pipeline/sequence"
)

// FaultsTruth is truth/faults.json: what went wrong in each frame.
type FaultsTruth struct {
	Schema    int    `json:"schema"`
	Seed      uint64 `json:"seed"`
	Perfect   bool   `json:"perfect"`
	Noiseless bool   `json:"noiseless"`
	// Faults are those asked for.
	Faults []Fault `json:"faults"`
	// DeadColumns are the active columns, from 0, that see no light.
	DeadColumns []int `json:"dead_columns"`
	// Frames has an entry a step, in order.
	Frames []FrameTruth `json:"frames"`
}

// FrameTruth is what the faults did to a step; values at their neutral are left
// out but the throughput.
type FrameTruth struct {
	Step int           `json:"step"`
	Kind sequence.Kind `json:"kind"`
	File string        `json:"file"`
	// Throughput is c.
	Throughput float64 `json:"throughput"`
	// Colour is the throughput's slope: the difference between the grid's ends.
	Colour float64 `json:"colour,omitempty"`
	// SkyLines is the factor of the sky's lines less 1.
	SkyLines float64 `json:"sky_lines,omitempty"`
	OffsetE  float64 `json:"offset_e,omitempty"`
	// Seeing is the factor of the seeing's width less 1.
	Seeing float64 `json:"seeing,omitempty"`
	// GuideU and GuideW are the field's move along u and w, in elements.
	GuideU float64 `json:"guide_u,omitempty"`
	GuideW float64 `json:"guide_w,omitempty"`
	// ShiftX and ShiftY are the image's move, px.
	ShiftX float64 `json:"shift_x_px,omitempty"`
	ShiftY float64 `json:"shift_y_px,omitempty"`
	Lost   bool    `json:"lost,omitempty"`
	// Labelled is the step whose STEP and MASKID the frame bears, if not its own.
	Labelled int `json:"labelled,omitempty"`
	// Shown is the step whose mask was shown, if not its own.
	Shown    int  `json:"shown,omitempty"`
	Flipped  bool `json:"flipped,omitempty"`
	Inverted bool `json:"inverted,omitempty"`
	// HitX, HitY and HitE list the samples that cosmic rays struck: active pixel,
	// from 0, and charge in electrons.
	HitX []int     `json:"hit_x,omitempty"`
	HitY []int     `json:"hit_y,omitempty"`
	HitE []float64 `json:"hit_e,omitempty"`
}

// faultsJSON writes the truth of the faults, a line a frame.
func (r *rehearsal) faultsJSON() ([]byte, error) {
	t := FaultsTruth{Schema: 1, Seed: r.opts.Seed, Perfect: r.opts.Perfect, Noiseless: r.opts.Noiseless, Faults: r.opts.Faults}
	if t.Faults == nil {
		t.Faults = []Fault{}
	}
	t.DeadColumns = []int{}
	for x, dead := range r.detector.dead {
		if dead {
			t.DeadColumns = append(t.DeadColumns, x)
		}
	}
	for i := range r.fates {
		t.Frames = append(t.Frames, r.frameTruth(i))
	}
	text, err := json.MarshalIndent(t, "", " ")
	return append(text, '\n'), err
}

func (r *rehearsal) frameTruth(i int) FrameTruth {
	f, st := &r.fates[i], r.seq.Steps[i]
	t := FrameTruth{
		Step: st.Step, Kind: st.Kind, File: FrameFile(st.Step), Throughput: f.throughput, Colour: f.colour,
		SkyLines: f.skyLines - 1, OffsetE: f.offsetE, Seeing: f.seeing - 1, GuideU: f.guideU, GuideW: f.guideW,
		ShiftX: f.shiftX, ShiftY: f.shiftY, Lost: f.lost, Flipped: f.shown.flipped, Inverted: f.shown.inverted,
	}
	if f.labels != i {
		t.Labelled = r.seq.Steps[f.labels].Step
	}
	if f.shown.step != i {
		t.Shown = r.seq.Steps[f.shown.step].Step
	}
	for _, h := range f.hits {
		if !r.detector.dead[h.x] {
			t.HitX, t.HitY, t.HitE = append(t.HitX, h.x), append(t.HitY, h.y), append(t.HitE, h.charge)
		}
	}
	return t
}
