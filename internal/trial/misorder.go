package trial

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"

	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// RehearseOrder draws a night whose device shows, in science step t of n, the mask of
// science step order(t, n), counted from 0, while every frame bears the labels of its
// own step. faults.json says which step's mask each frame shows.
func (n *Night) RehearseOrder(ctx context.Context, name string, order func(t, n int) int, opts rehearse.Options) error {
	shown, science := *n.Seq, n.Seq.StepsOf(sequence.Science)
	shown.Steps, shown.Code = slices.Clone(n.Seq.Steps), slices.Clone(n.Seq.Code)
	from := map[int]int{}
	for t, i := range science {
		j := science[order(t, len(science))]
		shown.Steps[i].Row, shown.Steps[i].MaskID, shown.Code[i] = n.Seq.Steps[j].Row, n.Seq.Steps[j].MaskID, n.Seq.Code[j]
		from[n.Seq.Steps[i].Step] = n.Seq.Steps[j].Step
	}
	other := *n
	other.Seq = &shown
	if err := other.Rehearse(ctx, name, opts); err != nil {
		return err
	}
	truth, err := n.Faults(name)
	if err != nil {
		return err
	}
	for i := range truth.Frames {
		f := &truth.Frames[i]
		step := f.Step
		if f.Shown > 0 {
			step = f.Shown
		}
		if j, ok := from[step]; ok && j != f.Step {
			f.Shown = j
		}
		if _, ok := from[f.Step]; !ok || f.Lost {
			continue
		}
		label := f.Step
		if f.Labelled > 0 {
			label = f.Labelled
		}
		path := filepath.Join(n.Frames(name), f.File)
		if err := replaceOnce(path, shown.Steps[label-1].MaskID, n.Seq.Steps[label-1].MaskID); err != nil {
			return err
		}
	}
	text, err := json.MarshalIndent(truth, "", " ")
	if err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(n.Frames(name), rehearse.TruthFolder, rehearse.FaultsFile), text, 0o644)
}

// replaceOnce writes a text over another of its length, which the file has once.
func replaceOnce(path, old, replacement string) error {
	data, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	if len(old) != len(replacement) || bytes.Count(data, []byte(old)) != 1 {
		return fmt.Errorf("%s: %q is not in it once", path, old)
	}
	return os.WriteFile(path, bytes.Replace(data, []byte(old), []byte(replacement), 1), 0o644)
}
