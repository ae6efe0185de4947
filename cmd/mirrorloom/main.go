// Command mirrorloom plans, rehearses and reduces Hadamard-multiplexed
// exposures of a spectrograph whose slit is a digital micromirror device.
//
// This package turns flags into one call of a pipeline package and its answer
// into words: it holds no algorithm. Answers go to standard output, progress
// and messages to standard error.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	code := run(ctx, os.Args[1:], os.Stdout, os.Stderr)
	stop()
	os.Exit(code)
}
