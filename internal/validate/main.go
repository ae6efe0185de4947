// Command validate measures what the project promises, on nights too long for
// the tests, and writes the figures to VALIDATION.md. It runs at the module's top
// folder: `make validate`, or `go run ./internal/validate`. It fails where a
// figure does, or a check could not be made.
//
// A check lies in a file of its own and is listed in checks.
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

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
)

// check measures figures on nights that it makes in an empty folder.
type check struct {
	name string
	// about says in a paragraph what is done.
	about string
	run   func(ctx context.Context, dir string) ([]trial.Finding, error)
}

// checks are all of them, in the order of the table.
func checks() []check {
	return []check{
		peakMemory(),
		extractCost(),
		interrupts(),
		resumes(),
		demoNight("optical", "demo", "demo", 0.6),
		// The figure of 60 % is that of `mirrorloom demo`; this target closes almost
		// half of the rows, where its strips end.
		demoNight("infrared", "demo-infrared", "demo-infrared", 0),
		calibratedNight("optical", "demo", "demo", 500.824),
		calibratedNight("infrared", "demo-infrared", "demo-infrared", 1644.0),
		lampTerms(),
		throughput(),
		faintNight(),
		cosmicRays(),
		enclosedFlux(),
		seeds(),
		restoreLost(),
		residualLight(),
		errorScale(),
		stuckMirrors(),
		allFaults(),
		apertures(),
		lineMaps(),
		forecasts(),
		readNoiseGain(),
		cosmicSingle(),
		falseAlarms(),
		audits(63, 16, 3),
		audits(255, 32, 10),
		flips(),
		combined(),
		skySubtraction(),
		onSky(),
	}
}

func main() {
	out := flag.String("o", "VALIDATION.md", "file to write")
	only := flag.String("only", "", "make only the checks whose names contain this; the file keeps what it says of the others")
	flag.Parse()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	defer stop()
	if err := run(ctx, *out, *only); err != nil {
		fmt.Fprintln(os.Stderr, "validate:", err)
		os.Exit(1)
	}
}

func run(ctx context.Context, out, only string) error {
	scratch, err := os.MkdirTemp("", "mirrorloom-validate-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(scratch)
	// The file is written after every check: a run that is stopped leaves what it measured.
	old := readSections(out)
	var done []result
	for i, c := range checks() {
		if !strings.Contains(c.name, only) {
			continue
		}
		fmt.Fprintf(os.Stderr, "%s ...\n", c.name)
		r, err := one(ctx, c, filepath.Join(scratch, fmt.Sprint(i)))
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if err != nil {
			fmt.Fprintln(os.Stderr, "validate:", c.name+":", err)
			r.findings = append(r.findings, trial.Finding{What: "the check was made", Required: "without error", Measured: "error", OK: false})
		}
		done = append(done, r)
		old[c.name] = r.section()
		if err := fitsutil.WriteAtomic(out, func(w io.Writer) error { return writeTable(w, old) }); err != nil {
			return err
		}
	}
	return verdict(done)
}

// result is a check that was made.
type result struct {
	check
	findings []trial.Finding
}

// one makes a check in a folder of its own, removed at the end.
func one(ctx context.Context, c check, dir string) (result, error) {
	if err := os.Mkdir(dir, 0o755); err != nil {
		return result{}, err
	}
	defer os.RemoveAll(dir)
	findings, err := c.run(ctx, dir)
	for _, f := range findings {
		fmt.Println(f)
	}
	return result{c, findings}, err
}

func verdict(done []result) error {
	failed, all := 0, 0
	for _, r := range done {
		for _, f := range r.findings {
			all++
			if !f.OK {
				failed++
			}
		}
	}
	switch {
	case all == 0:
		return fmt.Errorf("no check was made; the names are in internal/validate")
	case failed > 0:
		return fmt.Errorf("%d of %d figures fail", failed, all)
	}
	return nil
}
