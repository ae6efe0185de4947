package pair

import (
	"context"
	"time"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Options say where the frames are.
type Options struct {
	// Night is the folder of frames.
	Night string
	// ScratchDir is the folder that packed frames are unpacked into, one a
	// worker at a time; empty for the system's.
	ScratchDir string
	// Workers read headers at the same time; 0 for one a processor.
	Workers int
	// Audit has the dark columns judge which science frame shows which mask, from the
	// frames themselves (package audit), and corrects the pairing by it. With AsLabelled
	// it is said what is wrong, and nothing is corrected.
	Audit, AsLabelled bool
	// AuditProgress, which may be nil, is called as cycles are audited.
	AuditProgress func(done, total int)
}

// Night is a paired night.
type Night struct {
	// Dir is the folder of the frames.
	Dir string
	// Ledger has the row of step i+1 at i for every step, then the frames that
	// hold no step.
	Ledger product.Ledger
	// Frames are those to be used, in the order of their steps.
	Frames []Frame
	// Audit is what the audit found; nil if none was asked for.
	Audit *Audit
}

// Frame is a frame to be used. It holds nothing open.
type Frame struct {
	// StepIndex is the index into Sequence.Steps and Code, and of the frame's
	// row in the ledger.
	StepIndex int
	Kind      sequence.Kind
	// Path leads to the file; HDU is the index of the image in it.
	Path string
	HDU  int
	// Start is DATE-OBS as a time (UTC); the zero time where it is unknown.
	Start time.Time
	// Airmass is NaN where the header has none.
	Airmass float64
}

// Open opens the frame's file and gives its image; a packed file is unpacked
// into scratchDir ("" for the system's folder) until the file is closed.
func (f Frame) Open(scratchDir string) (*fitsutil.File, *fitsutil.Image, error) {
	file, err := fitsutil.OpenScratch(f.Path, scratchDir)
	if err != nil {
		return nil, nil, err
	}
	im, err := file.Image(f.HDU)
	if err != nil {
		file.Close() // only read from
		return nil, nil, err
	}
	return file, im, nil
}

// Of gives the frames of a kind in the order of their steps.
func (n *Night) Of(kind sequence.Kind) []Frame {
	var all []Frame
	for _, f := range n.Frames {
		if f.Kind == kind {
			all = append(all, f)
		}
	}
	return all
}

// Run reads the headers of a night and pairs its frames with the steps of seq.
// progress, which may be nil, is called after each file, by one goroutine at a
// time.
//
// A frame that cannot be used only gets its verdict. An error ends the run: an
// *Error when the folder cannot be read, holds no frame, is of another
// instrument or another size as a whole, or serves no science step; a
// *fitsutil.Error when the scratch folder is full; ctx.Err when cancelled.
func Run(ctx context.Context, seq *sequence.Sequence, opts Options, progress func(done, total int)) (*Night, error) {
	names, err := List(opts.Night)
	if err != nil {
		return nil, err
	}
	labels, err := readLabels(ctx, names, opts, seq.Profile, progress)
	if err != nil {
		return nil, err
	}
	m := newMatcher(opts.Night, seq, labels)
	m.audits = opts.Audit && !opts.AsLabelled
	if err := m.screen(); err != nil {
		return nil, err
	}
	m.byKeyword()
	m.byCandidates()
	if err := m.checkScience(); err != nil {
		return nil, err
	}
	if !opts.Audit {
		return m.night(), nil
	}
	found, err := m.audit(ctx, opts)
	if err != nil {
		return nil, err
	}
	if err := m.checkScience(); err != nil {
		return nil, err
	}
	n := m.night()
	n.Audit = found
	return n, nil
}
