package main

import (
	"bytes"
	"encoding/json"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/demo"
)

// The demo, once whole: it replaces what it is told to replace, its folders are
// those of the design (section 9), its night is at most 300 MB, its answer is one
// JSON object from which the words follow, and a second demo needs --replace.
func TestDemo(t *testing.T) {
	top := t.TempDir()
	show := filepath.Join(top, "show")
	fresh(t, show, true)
	cmd := exec.Command("mirrorloom", "demo", "-o", show, "--replace", "--json")
	var stderr strings.Builder
	cmd.Stderr = &stderr
	answer, err := cmd.Output()
	require.NoError(t, err, stderr.String())
	require.Empty(t, stderr.String())
	require.Equal(t, []string{"show"}, listing(t, top))

	require.Equal(t, []string{"night", "profile.yaml", "run", "scene.yaml", "sequence", "target.yaml"}, listing(t, show))
	require.Equal(t, []string{"masks", "plan.html", "plan.json", "profile.yaml", "sequence.fits", "steps.csv", "target.yaml"}, listing(t, filepath.Join(show, "sequence")))
	require.Equal(t, []string{"cube.fits", "ledger.csv", "report.html", "run.json"}, listing(t, filepath.Join(show, "run")))
	require.Equal(t, []string{"faults.json", "geometry.yaml", "scene.yaml", "truth.fits"}, listing(t, filepath.Join(show, "night", "truth")))
	require.LessOrEqual(t, folderBytes(t, filepath.Join(show, "night")), int64(300e6))

	var result demo.Result
	require.NoError(t, json.Unmarshal(answer, &result))
	require.Empty(t, result.Degraded)
	require.Len(t, listing(t, filepath.Join(show, "night")), result.Rehearsal.Frames+1, "frames and truth")
	checkAgreement(t, result.Agreement)
	checkWords(t, result.Words(show), show)

	checkEqualProducts(t, show)
	checkSecondDemo(t, show)
}

// checkEqualProducts reduces the demo's night again, by one worker in a few MiB:
// with lamps to calibrate by as well, the products are the same bytes.
func checkEqualProducts(t *testing.T, show string) {
	t.Helper()
	again := filepath.Join(t.TempDir(), "run")
	text, err := exec.Command("mirrorloom", "reduce", filepath.Join(show, "night"), "--sequence", filepath.Join(show, "sequence"),
		"--workers", "1", "--memory", "80MiB", "-o", again).CombinedOutput()
	require.NoError(t, err, string(text))
	for _, name := range []string{"cube.fits", "ledger.csv"} {
		want, err := os.ReadFile(filepath.Join(show, "run", name))
		require.NoError(t, err)
		got, err := os.ReadFile(filepath.Join(again, name))
		require.NoError(t, err)
		require.True(t, bytes.Equal(want, got), name)
	}
}

func folderBytes(t *testing.T, dir string) int64 {
	t.Helper()
	total := int64(0)
	require.NoError(t, filepath.WalkDir(dir, func(_ string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		total += info.Size()
		return err
	}))
	return total
}

// checkAgreement holds the figures of a night whose instrument was calibrated by
// its own lamps: pulls within 0.03 and 0.05, flux within 0.5 %.
func checkAgreement(t *testing.T, a *demo.Agreement) {
	t.Helper()
	require.GreaterOrEqual(t, float64(a.Good), 0.6*float64(a.Voxels))
	for _, p := range append(a.ByCounts[:], a.Pulls) {
		require.InDelta(t, 0, p.Mean, 0.03)
		require.InDelta(t, 1, p.Std, 0.05)
	}
	require.InDelta(t, 1, a.Flux, 0.005)
}

// checkWords demands that every path that the words name is there.
func checkWords(t *testing.T, words, show string) {
	t.Helper()
	require.Contains(t, words, "frames rehearsed and reduced")
	require.Contains(t, words, "standard deviation")
	named := 0
	for _, word := range strings.Fields(words) {
		if strings.HasPrefix(word, show) {
			_, err := os.Stat(word)
			require.NoError(t, err)
			named++
		}
	}
	require.GreaterOrEqual(t, named, 5)
}

// checkSecondDemo runs the demo again where one lies: it is refused without
// --replace, and with it the first one stays until the second is whole.
func checkSecondDemo(t *testing.T, show string) {
	t.Helper()
	text, err := exec.Command("mirrorloom", "demo", "-o", show).CombinedOutput()
	var exit *exec.ExitError
	require.ErrorAs(t, err, &exit)
	require.Equal(t, exitError, exit.ExitCode())
	require.Contains(t, string(text), "pass --replace")

	before := folderBytes(t, show)
	p := start(t, show, "demo", "--replace")
	time.Sleep(time.Second - time.Since(p.working))
	require.NoError(t, p.cmd.Process.Signal(syscall.SIGINT))
	require.Equal(t, exitInterrupted, p.end(t))
	require.Equal(t, before, folderBytes(t, show))
	require.Equal(t, []string{"show"}, listing(t, filepath.Dir(show)))
	_, err = os.Stat(filepath.Join(show, "run", "cube.fits"))
	require.NoError(t, err)
}
