// Package outside runs the programs that the tests check mirrorloom against:
// Debian's Python with numpy, scipy and astropy, and the FITS tools of Debian.
//
// A check whose program is missing is skipped, so that a machine without apt
// can still run the rest; under CI=true a skip is a failure, because there
// `make test` installs everything.
package outside

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"
)

// python is Debian's interpreter: another one on the path may lack astropy.
const python = "/usr/bin/python3"

// modules are those that the scripts import.
const modules = "numpy, scipy, astropy, PIL, yaml, astroscrappy"

var pythonReady = sync.OnceValue(func() error {
	return exec.Command(python, "-c", "import "+modules).Run()
})

// Python runs testdata/crosscheck/script with Debian's Python and returns its
// standard output. A non-zero exit fails the test with what the script printed.
func Python(t testing.TB, script string, args ...string) string {
	t.Helper()
	if err := pythonReady(); err != nil {
		missing(t, python+" with "+modules+" (make test installs them)")
	}
	return run(t, python, append([]string{filepath.Join(Root(t), "testdata", "crosscheck", script)}, args...)...)
}

// Program runs a program from the path, such as fitsverify, and returns its
// standard output. A non-zero exit fails the test.
func Program(t testing.TB, name string, args ...string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		missing(t, name+" (make test installs it)")
	}
	return run(t, path, args...)
}

// Generator runs the Go program in folder dir, a module of its own, and returns
// its standard output. Its modules are fetched if they are not there.
func Generator(t testing.TB, dir string, args ...string) string {
	t.Helper()
	dir = filepath.Join(Root(t), dir)
	if _, err := output(t.Context(), "go", "-C", dir, "mod", "download"); err != nil {
		missing(t, "modules of "+dir+", nor could they be fetched: "+err.Error())
	}
	return run(t, "go", append([]string{"-C", dir, "run", "."}, args...)...)
}

// Script is Python outside of a test. The error names ErrMissing where Python or one
// of its modules is.
func Script(ctx context.Context, script string, args ...string) (string, error) {
	if err := pythonReady(); err != nil {
		return "", fmt.Errorf("%s with %s: %w", python, modules, ErrMissing)
	}
	root, ok := root()
	if !ok {
		return "", errors.New("the program does not know where its source lies")
	}
	return output(ctx, python, append([]string{filepath.Join(root, "testdata", "crosscheck", script)}, args...)...)
}

// ErrMissing: `make packages` installs what is missing.
var ErrMissing = errors.New("missing; `make packages` installs it")

// Root is the top folder of the module.
func Root(t testing.TB) string {
	t.Helper()
	root, ok := root()
	if !ok {
		t.Fatal("the test binary does not know where its source lies")
	}
	return root
}

func root() (string, bool) {
	_, file, _, ok := runtime.Caller(0)
	return filepath.Dir(filepath.Dir(filepath.Dir(file))), ok
}

func run(t testing.TB, path string, args ...string) string {
	t.Helper()
	out, err := output(t.Context(), path, args...)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

// output is what a program prints; the error has all of it.
func output(ctx context.Context, path string, args ...string) (string, error) {
	cmd := exec.CommandContext(ctx, path, args...)
	// One thread: the suite shares two cores among packages.
	cmd.Env = append(os.Environ(), "OPENBLAS_NUM_THREADS=1", "PYTHONDONTWRITEBYTECODE=1")
	var stdout, stderr strings.Builder
	cmd.Stdout, cmd.Stderr = &stdout, &stderr
	if err := cmd.Run(); err != nil {
		return "", fmt.Errorf("%s %s: %w\n%s%s", path, strings.Join(args, " "), err, stdout.String(), stderr.String())
	}
	return stdout.String(), nil
}

func missing(t testing.TB, what string) {
	t.Helper()
	if os.Getenv("CI") == "true" {
		t.Fatalf("missing %s, and under CI=true a check may not be skipped", what)
	}
	t.Skipf("missing %s", what)
}
