package main

import (
	"context"
	"flag"
	"fmt"
	"io"
	"os"
	"os/signal"
	"strings"

	"mirrorloom/fitsutil"
)

func main() {
	out := flag.String("o", "BENCHMARKS.md", "file to write")
	runs := flag.Int("runs", 3, "runs of each side, in turn")
	flag.Parse()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	if err := run(ctx, *out, *runs); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(ctx context.Context, out string, runs int) error {
	scratch, err := os.MkdirTemp("", "mirrorloom-bench-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(scratch)
	m, err := thisMachine(ctx)
	if err != nil {
		return err
	}
	races, err := raceAll(ctx, scratch, runs)
	if err != nil {
		return err
	}
	decoding, err := measureDecoding(ctx, scratch)
	if err != nil {
		return err
	}
	kernels, err := measureKernels(ctx)
	if err != nil {
		return err
	}
	var b strings.Builder
	b.WriteString(`# Benchmarks

Written by ` + "`make bench`" + `. Figures are ratios of what ran in turn on one machine; medians.

`)
	m.write(&b)
	writeRaces(&b, races, runs)
	fmt.Fprintf(&b, "## Decoding\n\n%s\n", decoding.table())
	writeKernels(&b, kernels)
	fmt.Print(b.String())
	return fitsutil.WriteAtomic(out, func(w io.Writer) error {
		_, err := io.WriteString(w, b.String())
		return err
	})
}
