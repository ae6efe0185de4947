package nightsheet

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"path/filepath"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

// The files, in the sequence's folder. No later command reads them.
const (
	HTMLFile = "plan.html"
	JSONFile = "plan.json"
)

// Schema is the number of plan.json's form: it grows where a key changes its meaning or goes.
const Schema = 1

// Sheet is what plan.json holds: the plan's summary and what the page adds to it.
type Sheet struct {
	Schema int `json:"schema"`
	*plan.Summary
	// Verdict says in one sentence whether multiplexing pays.
	Verdict string `json:"verdict"`
	// Center is where the field's middle lies, Telescope where to send the telescope.
	Center    Position `json:"field_center"`
	Telescope Position `json:"telescope"`
	// Sky is the airmass over the night.
	Sky []AirmassAt `json:"airmass_over_night"`
	// Losses says how many frames may be lost.
	Losses Losses `json:"lost_frames"`
	// Footprint is the field on the sky.
	Footprint Footprint `json:"footprint"`
	Loading   Loading   `json:"mask_files"`
	// Runs are the steps, runs of like ones in a line; Steps all of them, one by one.
	Runs  []Run    `json:"runs"`
	Steps []StepAt `json:"steps_in_order"`

	sequence *sequence.Sequence
}

// Make gathers the sheet of a sequence that has been written and its summary, which it shares.
func Make(s *sequence.Sequence, r *plan.Summary) (*Sheet, error) {
	start, err := s.Target.Start()
	if err != nil {
		return nil, err
	}
	sheet := &Sheet{
		Schema: Schema, Summary: r, Verdict: verdict(r), Losses: lossesOf(s),
		Center:    Position{RADeg: s.Target.RADeg, DecDeg: s.Target.DecDeg, PositionAngleDeg: s.Target.RotangDeg},
		Footprint: footprintOf(s), Loading: loadingOf(s), sequence: s,
	}
	sheet.Telescope = sheet.Center
	if p := r.Pointing; p != nil {
		sheet.Telescope = Position{RADeg: p.RADeg, DecDeg: p.DecDeg, PositionAngleDeg: p.RotangDeg}
	}
	sheet.Center.spell()
	sheet.Telescope.spell()
	sheet.Steps = stepsOf(s, start)
	sheet.Runs = runsOf(s, sheet.Steps, everyRun)
	sheet.Sky = airmassOf(s, start, sheet.seconds())
	return sheet, nil
}

// Sequence is what the sheet was made of.
func (s *Sheet) Sequence() *sequence.Sequence { return s.sequence }

// seconds is the length of the night.
func (s *Sheet) seconds() float64 { return s.Minutes * 60 }

// Write makes the sheet and writes its two files into the sequence's folder. It is what
// plan.Options.Sheet wants.
func Write(dir string, s *sequence.Sequence, r *plan.Summary) error {
	sheet, err := Make(s, r)
	if err != nil {
		return err
	}
	for _, f := range []struct {
		name  string
		write func(io.Writer) error
	}{{JSONFile, sheet.WriteJSON}, {HTMLFile, sheet.WriteHTML}} {
		if err := fitsutil.WriteAtomic(filepath.Join(dir, f.name), f.write); err != nil {
			return fmt.Errorf("writing the night sheet: %w", err)
		}
	}
	return nil
}

// WriteJSON writes plan.json.
func (s *Sheet) WriteJSON(w io.Writer) error {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetIndent("", " ")
	if err := e.Encode(s); err != nil {
		return fmt.Errorf("%s: %w", JSONFile, err)
	}
	_, err := w.Write(b.Bytes())
	return err
}
