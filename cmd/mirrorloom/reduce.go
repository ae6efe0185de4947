package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"runtime"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
)

type reduceOptions struct {
	sequence string
	recipe   string
	products []string
	memory   byteSize
	workers  int
	cycles   []int
	labelled bool
	resume   bool
	output   outputOptions
}

func (o *reduceOptions) addFlags(f *pflag.FlagSet) {
	o.memory = reduce.DefaultMemoryBytes
	f.StringVar(&o.sequence, "sequence", "", "folder of the sequence, as plan wrote it")
	f.StringVar(&o.recipe, "recipe", reduce.DefaultRecipe, "recipe: a YAML file, or the name of a built-in one")
	f.StringSliceVar(&o.products, "products", []string{"cube"}, "what to write: cube, elements or both")
	f.Var(&o.memory, "memory", "memory that the program may take")
	f.IntVar(&o.workers, "workers", 0, "computations at the same time; 0 for one a processor")
	f.IntSliceVar(&o.cycles, "cycles", nil, "cycles of science steps to use, from 1, with commas; all without")
	f.BoolVar(&o.labelled, "as-labelled", false, "use every frame as its labels say, whatever the audit finds")
	f.BoolVar(&o.resume, "resume", false, "go on with the unfinished run that lies beside -o, and keep it there if this one is interrupted")
	o.output.addFlags(f, "products")
}

func newReduceCommand(a *app) *cobra.Command {
	var o reduceOptions
	cmd := &cobra.Command{
		Use:   "reduce NIGHT --sequence SEQ -o RUN",
		Short: "Turn a night of frames into a spectral cube",
		Args:  arguments("NIGHT, the folder of the frames"),
		RunE:  func(cmd *cobra.Command, args []string) error { return runReduce(cmd.Context(), a, args[0], o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

// options turns flags into those of the pipeline.
func (o *reduceOptions) options(a *app, night string) (reduce.Options, error) {
	if err := lacking("reduce", needed{"--sequence", o.sequence}, needed{"-o", o.output.dir}); err != nil {
		return reduce.Options{}, err
	}
	if o.workers < 0 {
		return reduce.Options{}, usageError{fmt.Errorf("--workers %d is negative; give 0 for one a processor", o.workers)}
	}
	opts := reduce.Options{
		Night: night, Sequence: o.sequence, MemoryBytes: int64(o.memory), Workers: o.workers, AsLabelled: o.labelled, Cycles: o.cycles,
		Log: a.log, Progress: a.progress(), Resume: o.resume,
		Note: func(clause string) { fmt.Fprintf(a.stderr, "mirrorloom: %s\n", clause) },
	}
	for _, p := range o.products {
		switch p {
		case "cube":
			opts.Cube = true
		case "elements":
			opts.Elements = true
		default:
			return opts, usageError{fmt.Errorf("--products %q is unknown; use cube, elements or cube,elements", p)}
		}
	}
	recipe, err := reduce.LoadRecipe(o.recipe)
	opts.Recipe = recipe
	return opts, err
}

func runReduce(ctx context.Context, a *app, night string, o reduceOptions) error {
	opts, err := o.options(a, night)
	if err != nil {
		return err
	}
	if o.workers > 0 {
		// The reader, the writer and the garbage collector compute as well.
		runtime.GOMAXPROCS(o.workers)
	}
	var result *reduce.Result
	work := func(dir string) (err error) {
		opts.Out = dir
		result, err = reduce.Run(ctx, opts)
		return err
	}
	inputs := []string{night, o.sequence, o.recipe, opts.Recipe.Arc.Use, opts.Recipe.Stars.Use}
	if o.resume {
		err = o.output.resume(ctx, work, reduce.CanResume, inputs...)
	} else {
		err = o.output.write(ctx, work, inputs...)
	}
	if err != nil {
		return err
	}
	if err := a.answer(result.Run, func(w io.Writer) error { return printReduction(w, o.output.dir, opts, result) }); err != nil {
		return err
	}
	return unlessWhole(result.Degraded)
}

func printReduction(w io.Writer, dir string, opts reduce.Options, r *reduce.Result) error {
	q := r.Run.Quality
	used := 0
	for _, e := range r.Ledger {
		if e.Verdict.Used() {
			used++
		}
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %d frames used", dir, used)
	if opts.Cube {
		fmt.Fprintf(&b, ", %.2f %% of the voxels good", 100*q.GoodFraction)
	}
	if q.CoveredGoodFraction > 0 {
		fmt.Fprintf(&b, " (%.2f %% of those in coded rows on the detector)", 100*q.CoveredGoodFraction)
	}
	b.WriteString("\n")
	b.WriteString(scienceWords(r))
	b.WriteString(flagWords(q))
	if q.DarkChi2Heldout != nil {
		fmt.Fprintf(&b, "dark columns: their squares are %.4f times what the errors say; 1 if errors can be believed\n", *q.DarkChi2Heldout)
	}
	printForecast(&b, r.Run.Forecast)
	if c := r.Run.Calibration; c != nil {
		for _, text := range c.Remarks {
			fmt.Fprintf(&b, "note: %s\n", text)
		}
	}
	for _, text := range r.Run.Warnings {
		fmt.Fprintf(&b, "warning: %s\n", text)
	}
	printStages(&b, r.Run.Stages)
	for _, p := range []struct {
		written    bool
		name, file string
	}{{opts.Cube, "cube", product.CubeFile}, {opts.Elements, "elements", product.ElementsFile}} {
		if p.written {
			fmt.Fprintf(&b, "%s: %s\n", p.name, filepath.Join(dir, p.file))
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// printStages prints the stages: seconds in all and of the parts of which they are made, as
// product.Stage has them, and which of these took longest.
func printStages(b *strings.Builder, stages []product.Stage) {
	fmt.Fprintf(b, "%-10s %8s %9s %7s %8s %10s %8s %8s  %s\n", "stage", "seconds", "GB", "GB/s", "reading", "computing", "writing", "waiting", "took longest")
	for _, s := range stages {
		line := fmt.Sprintf("%-10s %8.2f %9.3f %7.3f %8.2f %10.2f %8.2f %8.2f  %s", s.Name, s.Seconds, float64(s.Bytes)/1e9,
			s.GBPerS, s.ReadingS, s.ComputingS, s.WritingS, s.WaitingS, s.BottleneckWords())
		b.WriteString(strings.TrimRight(line, " ") + "\n")
	}
}
