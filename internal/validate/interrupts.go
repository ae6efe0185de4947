package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"time"

	"mirrorloom/internal/trial"
)

func interrupts() check {
	return check{
		name: "Interrupts",
		about: `The command demo as built, which plans, rehearses and reduces in turn, is sent SIGINT at ten
moments spread over its whole length: it must end with exit code 130 and leave
nothing. The tests do the same to every command by itself.`,
		run: runInterrupts,
	}
}

func runInterrupts(ctx context.Context, dir string) ([]trial.Finding, error) {
	const moments = 10
	out := filepath.Join(dir, "demo")
	start := time.Now()
	if err := exec.CommandContext(ctx, program, "demo", "-o", out).Run(); err != nil {
		return nil, fmt.Errorf("demo: %w", err)
	}
	whole := time.Since(start)
	if err := os.RemoveAll(out); err != nil {
		return nil, err
	}
	clean, slowest := 0, time.Duration(0)
	for i := range moments {
		took, err := interruptDemo(ctx, out, whole*time.Duration(2*i+1)/(2*moments))
		if err != nil {
			return nil, err
		}
		left, err := os.ReadDir(dir)
		if err != nil {
			return nil, err
		}
		if len(left) == 0 {
			clean++
		}
		slowest = max(slowest, took)
	}
	const most = 5 * time.Second
	return []trial.Finding{
		trial.AtLeast("demo interrupted, runs that left nothing", float64(clean), moments, moments),
		trial.Below("demo interrupted, longest time to its end, s", slowest.Seconds(), most.Seconds(), moments),
	}, nil
}

// interruptDemo sends SIGINT after some time and tells how long the demo went on.
// One that is over before, on a machine that has become faster, is run again and
// hit earlier.
func interruptDemo(ctx context.Context, out string, after time.Duration) (time.Duration, error) {
	for ; ; after = after * 9 / 10 {
		cmd := exec.CommandContext(ctx, program, "demo", "-o", out)
		if err := cmd.Start(); err != nil {
			return 0, err
		}
		ended := make(chan error, 1)
		go func() { ended <- cmd.Wait() }()
		select {
		case err := <-ended:
			if err = errors.Join(err, os.RemoveAll(out)); err != nil {
				return 0, fmt.Errorf("demo: %w", err)
			}
			continue
		case <-time.After(after):
		}
		sent := time.Now()
		if err := cmd.Process.Signal(os.Interrupt); err != nil && !errors.Is(err, os.ErrProcessDone) {
			return 0, err
		}
		err := <-ended
		var exit *exec.ExitError
		switch {
		case err == nil: // it had just finished
			if err := os.RemoveAll(out); err != nil {
				return 0, err
			}
		case errors.As(err, &exit) && exit.ExitCode() == 130:
			return time.Since(sent), nil
		default:
			return 0, fmt.Errorf("demo interrupted: %w, not exit code 130", err)
		}
	}
}
