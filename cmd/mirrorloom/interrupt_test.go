package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// process is mirrorloom at work on an output folder, as a process of its own.
type process struct {
	cmd            *exec.Cmd
	stdout, stderr bytes.Buffer
	ended          chan error
	part           string
	// working is when the unfinished folder was first seen.
	working time.Time
}

// start runs mirrorloom with `-o out` and waits until it works: until its .part
// is there.
func start(t *testing.T, out string, args ...string) *process {
	t.Helper()
	p := &process{cmd: exec.Command("mirrorloom", append(args, "-o", out)...), ended: make(chan error, 1), part: out + ".part"}
	p.cmd.Stdout, p.cmd.Stderr = &p.stdout, &p.stderr
	require.NoError(t, p.cmd.Start())
	go func() { p.ended <- p.cmd.Wait() }()
	for {
		if _, err := os.Stat(p.part); err == nil {
			p.working = time.Now()
			return p
		}
		select {
		case err := <-p.ended:
			t.Fatalf("%v ended before it made a folder: %v\n%s", args, err, p.stderr.String())
		case <-time.After(time.Millisecond):
		}
	}
}

// end waits for the process and gives its exit code as a shell does.
func (p *process) end(t *testing.T) int {
	t.Helper()
	err := <-p.ended
	var exit *exec.ExitError
	if !errors.As(err, &exit) {
		require.NoError(t, err)
		return 0
	}
	if status := exit.Sys().(syscall.WaitStatus); status.Signaled() {
		return 128 + int(status.Signal())
	}
	return exit.ExitCode()
}

// signalled starts mirrorloom and sends it a signal so long after it began to
// work. A run that was over before is made again and hit twice as early. fresh
// prepares the place for each.
func signalled(t *testing.T, sig syscall.Signal, after time.Duration, fresh func(), out string, args ...string) (*process, int) {
	t.Helper()
	for {
		fresh()
		p := start(t, out, args...)
		time.Sleep(after - time.Since(p.working))
		// The process may have ended: then its exit code says so.
		_ = p.cmd.Process.Signal(sig)
		sent := time.Now()
		if code := p.end(t); code != exitWhole {
			require.Less(t, time.Since(sent), 10*time.Second, "an interrupted run ends soon")
			return p, code
		}
		require.Greater(t, after, time.Duration(0), "a run can be hit when its folder was just made")
		if after /= 2; after < time.Millisecond {
			after = 0
		}
	}
}

// interrupted hits a command at ten moments, from when it begins to work on, by
// SIGINT and SIGTERM in turn, with an old folder to be replaced and without:
// exit code 130, one sentence, the old folder as it was, and nothing else.
func interrupted(t *testing.T, whole time.Duration, args ...string) {
	const moments = 10
	for i := range moments {
		sig := []syscall.Signal{syscall.SIGINT, syscall.SIGTERM}[i%2]
		old := i%4 >= 2
		after := whole * time.Duration(i) / moments
		t.Run(fmt.Sprintf("%d of %d, %v, old folder %v", i, moments, sig, old), func(t *testing.T) {
			dir := t.TempDir()
			out := filepath.Join(dir, "out")
			asked := args
			if old {
				asked = append(slices.Clone(args), "--replace")
			}
			p, code := signalled(t, sig, after, func() { fresh(t, out, old) }, out, asked...)
			require.Equal(t, exitInterrupted, code, p.stderr.String())
			require.Equal(t, "mirrorloom: interrupted; nothing was left behind\n", p.stderr.String())
			require.Empty(t, p.stdout.String())
			if !old {
				require.Empty(t, listing(t, dir))
				return
			}
			require.Equal(t, []string{"out"}, listing(t, dir))
			require.Equal(t, []string{"mine"}, listing(t, out))
		})
	}
}

// fresh leaves nothing of an output folder, or a folder of the user's own.
func fresh(t *testing.T, out string, old bool) {
	t.Helper()
	require.NoError(t, os.RemoveAll(out))
	if old {
		require.NoError(t, os.Mkdir(out, 0o755))
		require.NoError(t, os.WriteFile(filepath.Join(out, "mine"), []byte("mine"), 0o644))
	}
}

func listing(t *testing.T, dir string) []string {
	t.Helper()
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	var names []string
	for _, e := range entries {
		names = append(names, e.Name())
	}
	return names
}

// timed runs a command whole and tells how long it worked.
func timed(t *testing.T, out string, args ...string) time.Duration {
	t.Helper()
	p := start(t, out, args...)
	require.Equal(t, exitWhole, p.end(t), p.stderr.String())
	return time.Since(p.working)
}

// longSequence is the tiny sequence of so many cycles, for runs that last.
func longSequence(t *testing.T, dir string, cycles int) string {
	t.Helper()
	target := filepath.Join(dir, "long.yaml")
	text, err := os.ReadFile(filepath.Join(dir, "target.yaml"))
	require.NoError(t, err)
	long := strings.Replace(string(text), "dark: 3,", fmt.Sprintf("dark: 3, cycles: %d,", cycles), 1)
	require.NoError(t, os.WriteFile(target, []byte(long), 0o644))
	seq := filepath.Join(dir, "longseq")
	timed(t, seq, "plan", target, "--profile", filepath.Join(dir, "profile.yaml"))
	return seq
}

func TestInterruptedRunsLeaveNothing(t *testing.T) {
	dir := tiny(t)
	in := func(name string) string { return filepath.Join(dir, name) }
	seq := longSequence(t, dir, 5)
	commands := []struct {
		name string
		args []string
	}{
		{"plan", []string{"plan", "demo", "--profile", "optical"}},
		{"rehearse", []string{"rehearse", seq, "--scene", in("scene.yaml"), "--seed", "1", "--perfect"}},
		{"reduce", []string{"reduce", in("rehearse"), "--sequence", seq, "--recipe", "nominal", "--products", "cube,elements", "--memory", "57MiB"}},
	}
	for _, c := range commands {
		whole := timed(t, in(c.name), c.args...)
		t.Run(c.name, func(t *testing.T) { interrupted(t, whole, c.args...) })
	}
	// The demo is all of these in turn. Its first second has its plan and the
	// start of its rehearsal; `make validate` goes on to its end.
	t.Run("demo", func(t *testing.T) { interrupted(t, 1200*time.Millisecond, "demo") })
}

// A killed run can tidy nothing. It leaves no more than its .part, from which
// the next run starts anew, and the old folder as it was.
func TestKilledRunsLeaveTheirPartAlone(t *testing.T) {
	dir := tiny(t)
	in := func(name string) string { return filepath.Join(dir, name) }
	seq := longSequence(t, dir, 5)
	for _, c := range []struct {
		name, product string
		args          []string
	}{
		{"rehearse", "f00050.fits", []string{"rehearse", seq, "--scene", in("scene.yaml"), "--seed", "1", "--perfect"}},
		{"reduce", "cube.fits", []string{"reduce", in("rehearse"), "--recipe", "nominal", "--sequence", seq, "--memory", "57MiB"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			whole := timed(t, in(c.name), c.args...)
			want, err := os.ReadFile(filepath.Join(in(c.name), c.product))
			require.NoError(t, err)
			for i := range 4 {
				top := t.TempDir()
				out, old := filepath.Join(top, "out"), i%2 == 1
				args := append(slices.Clone(c.args), "--replace")
				_, code := signalled(t, syscall.SIGKILL, whole*time.Duration(i)/4, func() { fresh(t, out, old) }, out, args...)
				require.Equal(t, 128+int(syscall.SIGKILL), code)
				if old {
					require.Equal(t, []string{"mine"}, listing(t, out))
					require.Equal(t, []string{"out", "out.part"}, listing(t, top))
				} else {
					require.Equal(t, []string{"out.part"}, listing(t, top))
				}
				runOver(t, out, args...)
				require.Equal(t, []string{"out"}, listing(t, top))
				got, err := os.ReadFile(filepath.Join(out, c.product))
				require.NoError(t, err)
				require.True(t, bytes.Equal(want, got), "the run after a killed one makes the same %s", c.product)
			}
		})
	}
}

// runOver runs a command whole where a .part lies already.
func runOver(t *testing.T, out string, args ...string) {
	t.Helper()
	text, err := command(out, args...)
	require.NoError(t, err, text)
}

// command runs mirrorloom with `-o out` and gives all that it says.
func command(out string, args ...string) (string, error) {
	text, err := exec.Command("mirrorloom", append(slices.Clone(args), "-o", out)...).CombinedOutput()
	return string(text), err
}
