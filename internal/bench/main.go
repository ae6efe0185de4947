package main

import (
	"context"
	"flag"
	"fmt"
	"io"
	"os"
	"os/signal"
	"path/filepath"
	"strings"
	"time"

	"mirrorloom/fitsutil"
)

func main() {
	if len(os.Args) > 1 && os.Args[1] == floorCommand {
		if err := runFloor(os.Args[2:]); err != nil {
			fmt.Fprintln(os.Stderr, "bench:", err)
			os.Exit(1)
		}
		return
	}
	out := flag.String("o", "BENCHMARKS.md", "file to write")
	runs := flag.Int("runs", 3, "runs of each side, in turn")
	only := flag.String("only", "", "measure only the sections whose names contain this; the file keeps what it says of the others")
	keep := flag.String("nights", "", "folder to leave the rehearsed nights in for another run (up to 20 GB); without, they are removed")
	flag.Parse()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	if err := run(ctx, *out, *only, *keep, *runs); err != nil {
		fmt.Fprintln(os.Stderr, "bench:", err)
		os.Exit(1)
	}
}

func run(ctx context.Context, out, only, keep string, runs int) error {
	scratch, err := os.MkdirTemp("", "mirrorloom-bench-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(scratch)
	m, err := thisMachine(ctx)
	if err != nil {
		return err
	}
	s := &session{dir: filepath.Join(scratch, "section"), nights: &nights{root: filepath.Join(scratch, "nights")}, runs: runs}
	if keep != "" {
		s.nights = &nights{root: keep, keep: true}
	}
	// The file is written after every section: a run that is stopped leaves what it measured.
	all, measured := readSections(out), 0
	for _, part := range sections() {
		if !strings.Contains(strings.ToLower(part.name), strings.ToLower(only)) {
			continue
		}
		measured++
		text, err := measure(ctx, s, part)
		if err != nil {
			return fmt.Errorf("%s: %w", part.name, err)
		}
		all[part.name] = text
		if err := fitsutil.WriteAtomic(out, func(w io.Writer) error {
			_, err := io.WriteString(w, writeSections(m, all))
			return err
		}); err != nil {
			return err
		}
	}
	if measured == 0 {
		return fmt.Errorf("no section is named %q; the names are in internal/bench/section.go", only)
	}
	return nil
}

// measure makes a section in an empty folder, removed at the end.
func measure(ctx context.Context, s *session, part section) (string, error) {
	if err := os.Mkdir(s.dir, 0o755); err != nil {
		return "", err
	}
	defer os.RemoveAll(s.dir)
	before, start := load(), time.Now()
	fmt.Fprintf(os.Stderr, "%s (load %s) ...\n", part.name, before)
	text, err := part.run(ctx, s)
	if err != nil {
		return "", err
	}
	fmt.Fprintf(os.Stderr, "%s took %.0f s\n", part.name, time.Since(start).Seconds())
	fmt.Print(text)
	return fmt.Sprintf("%s\n\nLoad before: %s.\n", strings.TrimRight(text, "\n"), before), nil
}
