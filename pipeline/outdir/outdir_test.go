package outdir

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

func put(t *testing.T, dir, name, text string) {
	t.Helper()
	require.NoError(t, os.MkdirAll(dir, 0o755))
	require.NoError(t, os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644))
}

func names(t *testing.T, dir string) []string {
	t.Helper()
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	var all []string
	for _, e := range entries {
		all = append(all, e.Name())
	}
	return all
}

func TestCommitMakesTheFolderWhole(t *testing.T) {
	for _, before := range []string{"absent", "empty", "full"} {
		t.Run(before, func(t *testing.T) {
			top := t.TempDir()
			out := filepath.Join(top, "deep", "run")
			switch before {
			case "empty":
				require.NoError(t, os.MkdirAll(out, 0o755))
			case "full":
				put(t, out, "old", "old")
			}
			d, err := Begin(out, before == "full")
			require.NoError(t, err)
			put(t, d.Path(), "new", "new")
			if before == "full" {
				require.Equal(t, []string{"old"}, names(t, out), "the old one stays until the new is whole")
			}
			require.NoError(t, d.Commit())
			require.NoError(t, d.Abort(), "abort after commit does nothing")
			require.Equal(t, []string{"new"}, names(t, out))
			require.Equal(t, []string{"run"}, names(t, filepath.Dir(out)), "nothing else is left")
		})
	}
}

func TestAbortLeavesTheOldOne(t *testing.T) {
	out := filepath.Join(t.TempDir(), "run")
	put(t, out, "old", "old")
	d, err := Begin(out, true)
	require.NoError(t, err)
	put(t, d.Path(), "new", "new")
	require.NoError(t, d.Abort())
	require.Equal(t, []string{"old"}, names(t, out))
	require.Equal(t, []string{"run"}, names(t, filepath.Dir(out)))
}

func TestRefusals(t *testing.T) {
	top := t.TempDir()
	full := filepath.Join(top, "full")
	put(t, full, "x", "x")
	_, err := Begin(full, false)
	require.ErrorIs(t, err, ErrNotEmpty)
	require.ErrorContains(t, err, "--replace")

	_, err = Begin(filepath.Join(full, "x"), true)
	require.ErrorContains(t, err, "not a directory")
	_, err = Begin(filepath.Join(full, "x", "below"), false)
	require.ErrorContains(t, err, "not a directory")
	_, err = Begin("", false)
	require.ErrorContains(t, err, "-o")
	require.Equal(t, []string{"full"}, names(t, top), "a refusal leaves nothing")
}

func TestSecondRunIsRefusedAndAStaleOneCleared(t *testing.T) {
	top := t.TempDir()
	out := filepath.Join(top, "run")
	first, err := Begin(out, false)
	require.NoError(t, err)
	_, err = Begin(out, false)
	require.ErrorIs(t, err, ErrBusy)
	require.NoError(t, first.Abort())

	put(t, out+".part", "left", "by a killed run")
	next, err := Begin(out, false)
	require.NoError(t, err)
	require.Empty(t, names(t, next.Path()))
	require.NoError(t, next.Commit())
	require.Equal(t, []string{"run"}, names(t, top))
}

func TestAFailedRunTakesItsFoldersAway(t *testing.T) {
	top := t.TempDir()
	out := filepath.Join(top, "deep", "deeper", "run")
	d, err := Begin(out, false)
	require.NoError(t, err)
	require.NoError(t, d.Abort())
	require.Empty(t, names(t, top))

	// Not those that were there, or that something else was put into.
	put(t, filepath.Join(top, "deep"), "mine", "mine")
	d, err = Begin(out, false)
	require.NoError(t, err)
	require.NoError(t, d.Abort())
	require.Equal(t, []string{"mine"}, names(t, filepath.Join(top, "deep")))
	d, err = Begin(out, false)
	require.NoError(t, err)
	put(t, filepath.Dir(out), "mine", "mine")
	require.NoError(t, d.Abort())
	require.Equal(t, []string{"mine"}, names(t, filepath.Dir(out)))
}

func TestInputsAreNotReplaced(t *testing.T) {
	top := t.TempDir()
	night := filepath.Join(top, "night")
	put(t, night, "f.fits", "frame")
	require.NoError(t, os.Symlink(night, filepath.Join(top, "link")))
	for _, c := range []struct{ out, input string }{
		{night, night},
		{night, filepath.Join(top, "link")},
		{filepath.Join(top, "link"), night},
		{top, night},
		{night, filepath.Join(night, "f.fits")},
		{night, filepath.Join(top, "other", "..", "night")},
	} {
		_, err := Begin(c.out, true, "optical", c.input)
		require.ErrorIs(t, err, ErrInput, "%v", c)
		require.ErrorContains(t, err, "choose another with -o")
	}
	require.Equal(t, []string{"link", "night"}, names(t, top))

	// Beside and below an input is fair, and so are names alike.
	for _, out := range []string{filepath.Join(top, "run"), filepath.Join(night, "run"), night + "2", filepath.Join(top, "..night")} {
		d, err := Begin(out, true, night)
		require.NoError(t, err, out)
		require.NoError(t, d.Abort())
	}
}

// What an earlier run left is there for one that resumes, and cleared by one that does
// not; a run that is left can be gone on with, again and again.
func TestResumeFindsWhatWasLeft(t *testing.T) {
	path := filepath.Join(t.TempDir(), "deep", "out")
	d, err := Resume(path, false)
	require.NoError(t, err)
	require.Empty(t, names(t, d.Path()))
	require.NoError(t, os.WriteFile(filepath.Join(d.Path(), "half"), nil, 0o644))
	_, err = Resume(path, false)
	require.ErrorIs(t, err, ErrBusy)
	require.NoError(t, d.Leave())
	require.NoError(t, d.Abort(), "nothing after Leave")
	require.Error(t, d.Leave())
	for range 2 {
		d, err = Resume(path, false)
		require.NoError(t, err)
		require.Equal(t, []string{"half"}, names(t, d.Path()))
		require.NoError(t, d.Leave())
	}
	d, err = Begin(path, false)
	require.NoError(t, err)
	require.Empty(t, names(t, d.Path()))
	require.NoError(t, d.Commit())
	require.NoDirExists(t, path+".part")
}
