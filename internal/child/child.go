// Package child runs programs and tells what they took: time, and the peak of
// their memory. `make bench` and `make validate` share it.
//
// Linux counts the memory of the parent at the fork into the child's peak: keep
// the parent small until its children are measured.
package child

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"time"
)

// Usage is what a program took.
type Usage struct {
	Wall, CPU time.Duration
	// PeakBytes is the largest resident memory (ru_maxrss).
	PeakBytes int64
}

// blas are settings that a machine may have made for all programs. They would
// rule how numpy computes, so that it is run without them.
var blas = []string{"OPENBLAS_CORETYPE=", "OPENBLAS_L2_SIZE=", "OPENBLAS_NUM_THREADS=", "OMP_NUM_THREADS="}

// Environment is that of the programs that Run runs.
func Environment() []string {
	return slices.DeleteFunc(os.Environ(), func(setting string) bool {
		return slices.ContainsFunc(blas, func(prefix string) bool { return strings.HasPrefix(setting, prefix) })
	})
}

// Run runs a program to its end. The error of one that fails shows what it said
// on standard error.
func Run(ctx context.Context, name string, args ...string) (Usage, error) {
	cmd := exec.CommandContext(ctx, name, args...)
	cmd.Env = Environment()
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	start := time.Now()
	err := cmd.Run()
	wall := time.Since(start)
	if err != nil {
		return Usage{}, fmt.Errorf("%s %s: %w: %s", filepath.Base(name), strings.Join(args, " "), err, strings.TrimSpace(stderr.String()))
	}
	s := cmd.ProcessState
	const bytesPerUnit = 1024 // getrusage(2): kilobytes
	return Usage{
		Wall: wall, CPU: s.UserTime() + s.SystemTime(),
		PeakBytes: s.SysUsage().(*syscall.Rusage).Maxrss * bytesPerUnit,
	}, nil
}
