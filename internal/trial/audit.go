package trial

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Audited compares what an audit found with what went wrong.
type Audited struct {
	Night *pair.Night
	// Wrong lists the science frames that do not show the mask of their label, by the
	// step of the label; Missed those of them that were not found, Mistaken those that
	// were, but not used for the step that they show or used for another one. False
	// lists frames called wrong that are right.
	Wrong, Missed, Mistaken, False []int
}

// Audit pairs the night named name with an audit and holds the ledger against
// faults.json.
func (n *Night) Audit(ctx context.Context, name string, opts pair.Options) (*Audited, error) {
	opts.Night, opts.Audit = n.Frames(name), true
	night, err := pair.Run(ctx, n.Seq, opts, nil)
	if err != nil {
		return nil, err
	}
	truth, err := n.Faults(name)
	if err != nil {
		return nil, err
	}
	a := &Audited{Night: night}
	shown := map[string]product.Entry{} // by file
	for _, e := range night.Ledger {
		shown[e.File] = e
	}
	for _, f := range truth.Frames {
		if f.Kind != sequence.Science || f.Lost {
			continue
		}
		label, shows := f.Step, f.Step
		if f.Labelled > 0 {
			label = f.Labelled
		}
		if f.Shown > 0 {
			shows = f.Shown
		}
		e, found := shown[f.File]
		if !found {
			return nil, fmt.Errorf("%s: the ledger has no row for %s", n.Frames(name), f.File)
		}
		right := label == shows && !f.Flipped && !f.Inverted
		switch {
		case right && e.Verdict != product.OK:
			a.False = append(a.False, label)
		case right:
		case e.Verdict == product.OK:
			a.Wrong, a.Missed = append(a.Wrong, label), append(a.Missed, label)
		default:
			a.Wrong = append(a.Wrong, label)
			// A frame that was labelled wrongly has to serve the step that it shows; a
			// stale one may, where that step's own frame is wrong too.
			whole := !f.Flipped && !f.Inverted
			used := e.Verdict == product.Relabelled
			if used && (e.Step != shows || !whole) || !used && whole && f.Labelled > 0 && f.Shown == 0 {
				a.Mistaken = append(a.Mistaken, label)
			}
		}
	}
	return a, nil
}

// Faults reads the truth of the night named name.
func (n *Night) Faults(name string) (*rehearse.FaultsTruth, error) {
	path := filepath.Join(n.Frames(name), rehearse.TruthFolder, rehearse.FaultsFile)
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	truth := new(rehearse.FaultsTruth)
	if err := json.Unmarshal(data, truth); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(truth.Frames) != len(n.Seq.Steps) {
		return nil, fmt.Errorf("%s: %d frames, not the sequence's %d", path, len(truth.Frames), len(n.Seq.Steps))
	}
	return truth, nil
}
