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
	exitInterrupted = 130 // interrupted, nothing is left
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

// exitCode is the one place where an error becomes an exit code and a sentence
// on standard error.
func exitCode(ctx context.Context, err error, stderr io.Writer) int {
	var usage usageError
	var degraded degradedError
	switch {
	case err == nil:
		return exitWhole
	case errors.As(err, &degraded):
		fmt.Fprintf(stderr, "mirrorloom: %s\n", degraded.why)
		return exitDegraded
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
