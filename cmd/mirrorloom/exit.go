package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
)

// Exit codes: what a script may rely on.
const (
	exitWhole       = 0
	exitError       = 1   // nothing was written
	exitUsage       = 2   // the command line was wrong
	exitDegraded    = 3   // the product is written, but something in it is missing
	exitInterrupted = 130 // interrupted, nothing is left unless --resume asked for it
)

// usageError marks what the command line got wrong.
type usageError struct{ err error }

func (e usageError) Error() string { return e.err.Error() }
func (e usageError) Unwrap() error { return e.err }

// degradedError says why a product that was written is not whole.
type degradedError struct{ why string }

// unlessWhole is a degradedError that gives the reasons, nil where there is none.
func unlessWhole(reasons []string) error {
	if len(reasons) == 0 {
		return nil
	}
	return degradedError{"written, but not whole: " + strings.Join(reasons, "; ")}
}

func (e degradedError) Error() string { return e.why }

// leftError is the error of a run whose unfinished folder was left to be gone on with.
type leftError struct {
	err error
	dir string
}

func (e leftError) Error() string {
	return fmt.Sprintf("%v; what is done is kept in %s: once that is mended, give the same command to go on", e.err, e.dir)
}

func (e leftError) Unwrap() error { return e.err }

// exitCode is the one place where an error becomes an exit code and a sentence
// on standard error.
func exitCode(ctx context.Context, err error, stderr io.Writer) int {
	var usage usageError
	var degraded degradedError
	var left leftError
	switch {
	case err == nil:
		return exitWhole
	case errors.As(err, &degraded):
		fmt.Fprintf(stderr, "mirrorloom: %s\n", degraded.why)
		return exitDegraded
	case ctx.Err() != nil && errors.As(err, &left):
		fmt.Fprintf(stderr, "mirrorloom: interrupted; what is done is kept in %s: give the same command to go on\n", left.dir)
		return exitInterrupted
	case ctx.Err() != nil:
		fmt.Fprintln(stderr, "mirrorloom: interrupted; nothing was left behind")
		return exitInterrupted
	case errors.As(err, &usage):
		fmt.Fprintf(stderr, "mirrorloom: %v\n", err)
		return exitUsage
	default:
		fmt.Fprintf(stderr, "mirrorloom: %v\n", err)
		return exitError
	}
}
