package trial

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// Night is the folders of a trial, all in Dir.
type Night struct {
	Dir   string
	Field *Field
	Seq   *sequence.Sequence
}

// SequencePath is the folder of the sequence.
func (n *Night) SequencePath() string { return filepath.Join(n.Dir, "sequence") }

// Frames is the folder of the night named name.
func (n *Night) Frames(name string) string { return filepath.Join(n.Dir, "night-"+name) }

// Run is the folder of the products of the night named name.
func (n *Night) Run(name string) string { return filepath.Join(n.Dir, "run-"+name) }

// CubePath is the cube of the night named name, ElementsPath its element cube,
// TruthPath its truth.
func (n *Night) CubePath(name string) string { return filepath.Join(n.Run(name), product.CubeFile) }

// ElementsPath is the element cube of the night named name.
func (n *Night) ElementsPath(name string) string {
	return filepath.Join(n.Run(name), product.ElementsFile)
}

// TruthPath is the truth of the night named name.
func (n *Night) TruthPath(name string) string {
	return filepath.Join(n.Frames(name), rehearse.TruthFolder, rehearse.TruthFile)
}

// Plan writes the field's sequence into dir and reads it back.
func (f *Field) Plan(ctx context.Context, dir string) (*Night, error) {
	n := &Night{Dir: dir, Field: f}
	seq, _, err := plan.Build(ctx, f.Target, f.Profile)
	if err != nil {
		return nil, err
	}
	if err := seq.Write(ctx, n.SequencePath()); err != nil {
		return nil, err
	}
	n.Seq, err = sequence.Read(ctx, n.SequencePath())
	return n, err
}

// Rehearse draws a night. The instrument is perfect, unless the field's is not.
func (n *Night) Rehearse(ctx context.Context, name string, opts rehearse.Options) error {
	opts.Perfect = !n.Field.Imperfect
	if err := os.MkdirAll(n.Frames(name), 0o755); err != nil {
		return err
	}
	_, err := rehearse.Run(ctx, n.Seq, n.Field.Scene, opts, n.Frames(name), nil)
	return err
}

// Discard removes the frames and products of the night named name, if there are any.
func (n *Night) Discard(name string) error {
	return errors.Join(os.RemoveAll(n.Frames(name)), os.RemoveAll(n.Run(name)))
}

// Reduce reduces the night named name with the recipe of opts or, without one,
// the nominal one for a perfect instrument and the default one for another.
func (n *Night) Reduce(ctx context.Context, name string, opts reduce.Options) (*reduce.Result, error) {
	opts.Night, opts.Sequence, opts.Out = n.Frames(name), n.SequencePath(), n.Run(name)
	if err := os.MkdirAll(opts.Out, 0o755); err != nil {
		return nil, err
	}
	if opts.Recipe == nil {
		name := "nominal"
		if n.Field.Imperfect {
			name = reduce.DefaultRecipe
		}
		recipe, err := reduce.LoadRecipe(name)
		if err != nil {
			return nil, err
		}
		opts.Recipe = recipe
	}
	return reduce.Run(ctx, opts)
}

// Make rehearses a night and reduces it to a cube.
func (n *Night) Make(ctx context.Context, name string, opts rehearse.Options) (*reduce.Result, error) {
	if err := n.Rehearse(ctx, name, opts); err != nil {
		return nil, err
	}
	return n.Reduce(ctx, name, reduce.Options{Cube: true})
}

// The nights that Pair makes.
const (
	Noisy = "noisy"
	Twin  = "twin"
)

// Pair makes a night with its truth, reduced to a cube, and its twin without
// noise, reduced as well.
func (f *Field) Pair(ctx context.Context, dir string, seed uint64) (*Night, *reduce.Result, error) {
	n, err := f.Plan(ctx, dir)
	if err != nil {
		return nil, nil, err
	}
	result, err := n.Make(ctx, Noisy, rehearse.Options{Seed: seed})
	if err != nil {
		return nil, nil, fmt.Errorf("the noisy night: %w", err)
	}
	if _, err := n.Make(ctx, Twin, rehearse.Options{Seed: seed, Noiseless: true, NoTruth: true}); err != nil {
		return nil, nil, fmt.Errorf("the twin: %w", err)
	}
	return n, result, nil
}
