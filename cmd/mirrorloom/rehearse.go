package main

import (
	"context"
	"fmt"
	"io"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

type rehearseOptions struct {
	scene     string
	seed      uint64
	faults    []string
	perfect   bool
	noiseless bool
	noTruth   bool
	workers   int
	output    outputOptions
}

func (o *rehearseOptions) addFlags(f *pflag.FlagSet) {
	f.StringVar(&o.scene, "scene", "", "scene: a YAML file, or the name of a built-in one")
	f.Uint64Var(&o.seed, "seed", 0, "seed of all noise; equal seeds give equal bytes")
	f.StringArrayVar(&o.faults, "fault", nil, "something that goes wrong, NAME=SIZE (or flip, invert); may be given again")
	f.BoolVar(&o.perfect, "perfect", false, "an instrument exactly as the profile says: no shifts, even pixels, a linear detector")
	f.BoolVar(&o.noiseless, "noiseless", false, "no photon, read or rounding noise; frames of float32")
	f.BoolVar(&o.noTruth, "no-truth", false, "leave out truth.fits, most of the work of a large night")
	f.IntVar(&o.workers, "workers", 0, "computations at the same time; 0 for one a processor")
	o.output.addFlags(f, "night")
}

func newRehearseCommand(a *app) *cobra.Command {
	var o rehearseOptions
	cmd := &cobra.Command{
		Use:   "rehearse SEQ --scene S.yaml --seed N -o NIGHT",
		Short: "Draw the night that a sequence would give, with its truth",
		Long: `rehearse draws the raw frames of every step of a sequence under a scene, by a
forward model that shares no mapping or decoding with reduce, and beside them the
truth that a reduction should find. Lamps here are numbers: at the telescope mind
the cautions that come with lamps and high voltage, and the local rules.

Always drawn: light that is shifted, tilted and stretched against the profile, pixels and
mirrors that answer unevenly (not with --perfect), photon, read and rounding noise (not
with --noiseless), the profile's stuck mirrors, and the air if the scene has one. All else
that can go wrong is a fault: without them closed mirrors leak nothing, whatever contrast
the profile gives, neighbours lend each other nothing, each frame's throughput is 1, and
no cosmic ray strikes.

Faults, each off unless given as --fault NAME=SIZE:
  drift      throughput of each frame, rms          trend     throughput, linear, whole span
  colour     slope of the throughput over the band  sky       rms of sky lines against continuum
  offset     level of a frame, rms, electrons       leak      of every mirror that is off
  cosmic     struck samples per 1000                lost      frames that are not there
  mislabel   frames exchanged in pairs              seeing    relative rms
  guide      pointing, rms, elements                shift     image on the detector, rms, pixels
  persist    fraction left from the frame before    neighbour light diffracted between elements
  stale      frames that show the mask before       flip, invert   masks of N frames, or of all`,
		Args: arguments("SEQ, the folder of a sequence"),
		RunE: func(cmd *cobra.Command, args []string) error { return runRehearse(cmd.Context(), a, args[0], o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

func (o *rehearseOptions) options() (rehearse.Options, error) {
	opts := rehearse.Options{Seed: o.seed, Perfect: o.perfect, Noiseless: o.noiseless, NoTruth: o.noTruth, Workers: o.workers}
	if err := lacking("rehearse", needed{"--scene", o.scene}, needed{"-o", o.output.dir}); err != nil {
		return opts, err
	}
	if o.workers < 0 {
		return opts, usageError{fmt.Errorf("--workers %d is negative; give 0 for one a processor", o.workers)}
	}
	for _, text := range o.faults {
		fault, err := rehearse.ParseFault(text)
		if err != nil {
			return opts, usageError{err}
		}
		opts.Faults = append(opts.Faults, fault)
	}
	return opts, nil
}

func runRehearse(ctx context.Context, a *app, dir string, o rehearseOptions) error {
	opts, err := o.options()
	if err != nil {
		return err
	}
	seq, err := sequence.Read(ctx, dir)
	if err != nil {
		return err
	}
	scene, err := rehearse.LoadScene(o.scene)
	if err != nil {
		return err
	}
	draw := a.progress()
	var summary *rehearse.Summary
	err = o.output.write(ctx, func(dir string) (err error) {
		summary, err = rehearse.Run(ctx, seq, scene, opts, dir, func(done, total int) { draw("rehearse", done, total) })
		return err
	}, dir, o.scene)
	if err != nil {
		return err
	}
	return a.answer(summary, func(w io.Writer) error {
		_, err := fmt.Fprintf(w, "%s: %d frames of %d x %d pixels, %.3f GB; %.3g of the science samples saturated\n",
			o.output.dir, summary.Frames, summary.Columns, summary.Rows, float64(summary.Bytes)/1e9, summary.SaturatedFraction)
		return err
	})
}
