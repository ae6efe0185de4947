package reduce

import (
	"context"
	"os"
	"path/filepath"
	"runtime"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// A frame that changes while it is being read ends the run with a sentence that
// names it, whichever stage reads it next and however the file was changed.
func TestFrameThatChangesWhileItIsRead(t *testing.T) {
	p, target, scene := tiny(t)
	for _, c := range []struct {
		name, stage, frame string // at whose first rows the frame is changed
		change             func(path string) error
		sentence           string
	}{
		{"a science frame cut short", "strips", "f00021.fits", func(path string) error { return os.Truncate(path, 5760) }, "f00021.fits"},
		{"a science frame emptied", "strips", "f00031.fits", func(path string) error { return os.Truncate(path, 0) }, "f00031.fits"},
		{"a bias frame cut short", "prepare", "f00002.fits", func(path string) error { return os.Truncate(path, 5760) }, "f00002.fits"},
		{"a science frame cut short while the biases are read", "prepare", "f00021.fits", func(path string) error { return os.Truncate(path, 5760) }, "f00021.fits"},
	} {
		t.Run(c.name, func(t *testing.T) {
			night, seq := robustNight(t, p, target, scene)
			changed := false
			before := runtime.NumGoroutine()
			_, err := Run(context.Background(), Options{
				Night: night, Sequence: seq, Cube: true, Out: t.TempDir(), MemoryBytes: runtimeBytes + 200<<10, Workers: 2,
				Progress: func(stage string, done, total int) {
					if stage == c.stage && !changed && done < total {
						changed = true
						require.NoError(t, c.change(filepath.Join(night, c.frame)))
					}
				},
			})
			require.True(t, changed)
			require.ErrorContains(t, err, c.sentence)
			require.Contains(t, err.Error(), "; ", "the sentence names a cure")
			require.NotContains(t, err.Error(), "internal error")
			requireQuiet(t, before)
		})
	}
}

// A run that is cancelled in any stage ends with the context's error, leaves no
// goroutine, no open frame and no scratch folder.
func TestCancelledRunTidiesUp(t *testing.T) {
	p, target, scene := tiny(t)
	night, seq := robustNight(t, p, target, scene)
	for _, stage := range []string{"pair", "prepare", "strips"} {
		t.Run(stage, func(t *testing.T) {
			ctx, cancel := context.WithCancel(context.Background())
			defer cancel()
			before, open := runtime.NumGoroutine(), openFiles(t)
			out := t.TempDir()
			_, err := Run(ctx, Options{
				Night: night, Sequence: seq, Cube: true, Elements: true, Out: out, MemoryBytes: runtimeBytes + 200<<10, Workers: 2,
				Progress: func(at string, done, total int) {
					if at == stage && done < total {
						cancel()
					}
				},
			})
			require.ErrorIs(t, err, context.Canceled)
			requireQuiet(t, before)
			require.Equal(t, open, openFiles(t))
			left, err := os.ReadDir(out)
			require.NoError(t, err)
			require.Empty(t, left)
		})
	}
}

// requireQuiet waits until no more goroutines run than before.
func requireQuiet(t *testing.T, before int) {
	t.Helper()
	for deadline := time.Now().Add(5 * time.Second); runtime.NumGoroutine() > before; time.Sleep(time.Millisecond) {
		require.True(t, time.Now().Before(deadline), "%d goroutines, %d before", runtime.NumGoroutine(), before)
	}
}

func openFiles(t *testing.T) int {
	t.Helper()
	entries, err := os.ReadDir("/proc/self/fd")
	require.NoError(t, err)
	return len(entries)
}
