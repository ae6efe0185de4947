package main

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// edited replaces texts, each of which must be there, in a file.
func edited(t *testing.T, path string, texts ...string) {
	t.Helper()
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	for i := 0; i < len(texts); i += 2 {
		require.Contains(t, string(text), texts[i])
	}
	require.NoError(t, os.WriteFile(path, []byte(strings.NewReplacer(texts...).Replace(string(text))), 0o644))
}

// resumedNight is a small night of several cycles and many rows with a lost frame, hits to
// be restored, a throughput to be measured and a listed star, and the arguments that reduce it.
func resumedNight(t *testing.T) (args []string) {
	t.Helper()
	dir := tiny(t)
	in := func(name string) string { return filepath.Join(dir, name) }
	edited(t, in("target.yaml"), "v: 15, dark: 3, element_mirrors: 2", "v: 31, dark: 9, element_mirrors: 1, cycles: 3")
	edited(t, in("profile.yaml"), "rows: 34", "rows: 220", "rows: 40", "rows: 240", "1, 40]", "1, 240]", "y_center_px: 19.5", "y_center_px: 119.5")
	timed(t, in("long"), "plan", in("target.yaml"), "--profile", in("profile.yaml"))
	timed(t, in("nights"), "rehearse", in("long"), "--scene", in("scene.yaml"), "--seed", "3", "--perfect", "--fault", "cosmic=2", "--fault", "drift=0.03", "--fault", "lost=1")
	require.NoError(t, os.WriteFile(in("stars.csv"), []byte("name,ra_deg,dec_deg\nA,123.30026888,21.59961111\n"), 0o644))
	require.NoError(t, os.WriteFile(in("recipe.yaml"), []byte("flat: {use: off}\narc: {use: off}\nstars: {use: "+in("stars.csv")+"}\n"), 0o644))
	return []string{"reduce", in("nights"), "--sequence", in("long"), "--recipe", in("recipe.yaml"), "--products", "cube,elements"}
}

// Budgets of a run and of those that go on with it.
var resumedBudgets = [][]string{
	{"--memory", "57MiB", "--workers", "2"}, {"--memory", "300MiB", "--workers", "1"}, {"--memory", "58MiB", "--workers", "3"}, {"--memory", "64MiB"},
}

func productBytes(t *testing.T, out string) map[string]string {
	t.Helper()
	all := map[string]string{}
	for _, name := range []string{"cube.fits", "elements.fits", "ledger.csv"} {
		data, err := os.ReadFile(filepath.Join(out, name))
		require.NoError(t, err)
		all[name] = string(data)
	}
	return all
}

// A run that is killed at any moment, whether it was told to be resumed or not, and
// resumed, perhaps killed again, and resumed with another memory and other workers, gives the
// bytes of one that was not.
func TestKilledRunsGoOn(t *testing.T) {
	args := resumedNight(t)
	top := t.TempDir()
	out := filepath.Join(top, "out")
	began := time.Now()
	runOver(t, out, append(slices.Clone(args), resumedBudgets[0]...)...)
	whole := time.Since(began)
	want := productBytes(t, out)
	const moments, most = 10, 30
	rng := rand.New(rand.NewPCG(11, 7))
	resumed := 0
	fresh := func() {
		require.NoError(t, os.RemoveAll(out))
		require.NoError(t, os.RemoveAll(out+".part"))
	}
	for i := 0; i < moments || resumed < 2; i++ {
		require.Less(t, i, most, "some runs are killed within their strips")
		budget := func(k int) []string { return append(slices.Clone(args), resumedBudgets[(i+k)%len(resumedBudgets)]...) }
		first := budget(0)
		if i%2 == 0 {
			first = append(first, "--resume")
		}
		// The moments are spread over the whole run, one at random in each tenth of it.
		after := time.Duration((float64(i%moments) + rng.Float64()) / moments * float64(whole))
		_, code := signalled(t, syscall.SIGKILL, after, fresh, out, first...)
		require.Equal(t, 128+int(syscall.SIGKILL), code)
		require.Equal(t, []string{"out.part"}, listing(t, top))
		if i%3 == 0 { // once more
			p := start(t, out, append(budget(1), "--resume")...)
			time.Sleep(time.Duration(rng.Float64() * float64(whole) / 2))
			_ = p.cmd.Process.Kill() // it may have ended
			p.end(t)
			require.NoError(t, os.RemoveAll(out))
		}
		p := start(t, out, append(budget(2), "--resume")...)
		require.Equal(t, exitWhole, p.end(t), p.stderr.String())
		said := p.stderr.String()
		if strings.Contains(said, "rows of the detector are done") {
			resumed++
		}
		require.NotContains(t, said, "over", "after %v of %v", after, whole)
		require.NotContains(t, said, "anew")
		require.Equal(t, []string{"out"}, listing(t, top))
		for name, data := range productBytes(t, out) {
			require.True(t, data == want[name], "%s of a run killed after %v of %v: %s", name, after, whole, said)
		}
	}
}

// A run that is interrupted says how to go on; without --resume, and before anything is worth
// keeping, it leaves nothing.
func TestInterruptedRunsSayHowToGoOn(t *testing.T) {
	args := append(resumedNight(t), resumedBudgets[0]...)
	top := t.TempDir()
	out := filepath.Join(top, "out")
	began := time.Now()
	runOver(t, out, append(slices.Clone(args), "--resume")...)
	whole := time.Since(began)
	want := productBytes(t, out)
	fresh := func() {
		require.NoError(t, os.RemoveAll(out))
		require.NoError(t, os.RemoveAll(out+".part"))
	}
	kept := 0
	for i := range 6 {
		p, code := signalled(t, []syscall.Signal{syscall.SIGINT, syscall.SIGTERM}[i%2], whole*time.Duration(i+3)/10, fresh, out, append(slices.Clone(args), "--resume")...)
		require.Equal(t, exitInterrupted, code, p.stderr.String())
		if len(listing(t, top)) == 0 {
			require.Equal(t, "mirrorloom: interrupted; nothing was left behind\n", p.stderr.String())
			continue
		}
		kept++
		require.Equal(t, fmt.Sprintf("mirrorloom: interrupted; what is done is kept in %s.part: give the same command to go on\n", out), p.stderr.String())
		require.Equal(t, []string{"out.part"}, listing(t, top))
		runOver(t, out, append(slices.Clone(args), "--resume")...)
		for name, data := range productBytes(t, out) {
			require.True(t, data == want[name], name)
		}
	}
	require.Positive(t, kept)
}

// An error with --resume keeps what is done as well, where there is something; a run that is
// whole leaves nothing to be resumed, and is not written over.
func TestResumeAfterTheEnd(t *testing.T) {
	args := append(resumedNight(t), "--resume")
	top := t.TempDir()
	out := filepath.Join(top, "out")
	runOver(t, out, args...)
	require.Equal(t, []string{"out"}, listing(t, top))
	text, err := command(out, args...)
	require.Error(t, err)
	require.Contains(t, text, "the output folder is not empty")
	runOver(t, out, append(args, "--replace")...)
	// Another command's leftovers are no state.
	require.NoError(t, os.RemoveAll(out))
	require.NoError(t, os.MkdirAll(filepath.Join(out+".part", "masks"), 0o755))
	text, err = command(out, args...)
	require.NoError(t, err, text)
	require.NotContains(t, text, "unfinished run")
	require.NoDirExists(t, filepath.Join(out, "masks"))
}
