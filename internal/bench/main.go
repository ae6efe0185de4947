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
	runs := flag.Int("runs", 3, "runs of each side of a race, in turn")
	parts := flag.String("parts", "races,decoding,kernels", "what to measure")
	flag.Parse()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	if err := run(ctx, *out, *runs, strings.Split(*parts, ",")); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(ctx context.Context, out string, runs int, parts []string) error {
	scratch, err := os.MkdirTemp("", "mirrorloom-bench-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(scratch)
	m, err := thisMachine(ctx)
	if err != nil {
		return err
	}
	var b strings.Builder
	b.WriteString(`# Benchmarks

Written by ` + "`make bench`" + `. Figures are ratios of what ran in turn on one machine; medians.

`)
	m.write(&b)
	for _, part := range parts {
		if err := measure(ctx, &b, part, scratch, runs); err != nil {
			return err
		}
	}
	fmt.Print(b.String())
	return fitsutil.WriteAtomic(out, func(w io.Writer) error {
		_, err := io.WriteString(w, b.String())
		return err
	})
}

// measure does one part and writes what it found.
func measure(ctx context.Context, b *strings.Builder, part, scratch string, runs int) error {
	switch part {
	case "races":
		races, err := raceAll(ctx, scratch, runs)
		if err != nil {
			return err
		}
		writeRaces(b, races, runs)
	case "decoding":
		d, err := measureDecoding(ctx, scratch)
		if err != nil {
			return err
		}
		d.write(b)
	case "kernels":
		kernels, err := measureKernels(ctx)
		if err != nil {
			return err
		}
		writeKernels(b, kernels)
	default:
		return fmt.Errorf("no part %q; there are races, decoding and kernels", part)
	}
	return nil
}
