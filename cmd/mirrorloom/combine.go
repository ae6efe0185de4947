package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/combine"
	"mirrorloom/pipeline/product"
)

type combineOptions struct {
	memory  byteSize
	workers int
	output  outputOptions
}

func (o *combineOptions) addFlags(f *pflag.FlagSet) {
	o.memory = combine.DefaultMemoryBytes
	f.Var(&o.memory, "memory", "memory that the program may take")
	f.IntVar(&o.workers, "workers", 0, "computations at the same time; 0 for one a processor")
	o.output.addFlags(f, "combined run")
}

func newCombineCommand(a *app) *cobra.Command {
	var o combineOptions
	cmd := &cobra.Command{
		Use:   "combine RUN RUN... -o RUN",
		Short: "Put the cubes of several runs together",
		Long: `Put the cubes of runs, folders that reduce wrote, together: of repeated or
dithered nights, or of cycles of one night that were reduced one by one.

Each voxel is the mean over the runs in which it is good, weighted by 1/VARIANCE.
The runs must be of one instrument and have the same wavelengths, and their voxels
must coincide but for a whole number of elements and rows; a run whose voxels do
not is to be reduced again onto those of another, with 'grid: {onto: OTHER/cube.fits}'
in its recipe. The cube that comes out spans all of them.`,
		Example: `  mirrorloom combine first/run second/run third/run -o all`,
		Args:    twoRuns,
		RunE:    func(cmd *cobra.Command, args []string) error { return runCombine(cmd.Context(), a, args, o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

// twoRuns demands what there is to combine.
func twoRuns(cmd *cobra.Command, args []string) error {
	if len(args) < 2 {
		return arguments("a RUN", "another RUN")(cmd, args)
	}
	return nil
}

func runCombine(ctx context.Context, a *app, runs []string, o combineOptions) error {
	if err := lacking("combine", needed{"-o", o.output.dir}); err != nil {
		return err
	}
	if o.workers < 0 {
		return usageError{fmt.Errorf("--workers %d is negative; give 0 for one a processor", o.workers)}
	}
	var result *combine.Result
	err := o.output.write(ctx, func(dir string) (err error) {
		result, err = combine.Run(ctx, combine.Options{
			Runs: runs, Out: dir, MemoryBytes: int64(o.memory), Workers: o.workers, Log: a.log, Progress: a.progress(),
		})
		return err
	}, runs...)
	if err != nil {
		return err
	}
	if err := a.answer(result.Run, func(w io.Writer) error { return printCombination(w, o.output.dir, runs, result) }); err != nil {
		return err
	}
	return unlessWhole(result.Degraded)
}

func printCombination(w io.Writer, dir string, runs []string, r *combine.Result) error {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %d runs, %d elements, %d rows, %.2f %% of the voxels good\n", dir, len(runs), r.Schema.Elements, r.Schema.Rows, 100*r.Run.Quality.GoodFraction)
	for i, m := range r.Run.Combined {
		fmt.Fprintf(&b, "%s: %d frames, at element %d, row %d", runs[i], m.Frames, m.Element, m.Row)
		if m.LightErr > 0 {
			fmt.Fprintf(&b, ", %.4f +- %.4f times the light of the first", m.Light, m.LightErr)
		}
		b.WriteString("\n")
	}
	for _, text := range r.Run.Warnings {
		fmt.Fprintf(&b, "warning: %s\n", text)
	}
	fmt.Fprintf(&b, "cube: %s\n", filepath.Join(dir, product.CubeFile))
	_, err := io.WriteString(w, b.String())
	return err
}
