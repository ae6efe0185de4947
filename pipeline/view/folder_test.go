package view

import (
	"context"
	"io"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// names of a folder.
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

// What is kept lies in RUN/.cache, is as large as said, is used by the next viewer, and
// what belongs to other cubes, or was left unfinished, goes.
func TestKeptInTheRun(t *testing.T) {
	run := runCopy(t)
	cache := filepath.Join(run, CacheFolder)
	require.NoError(t, os.Mkdir(cache, 0o755))
	write := func(name string, age time.Duration) {
		path := filepath.Join(cache, name)
		require.NoError(t, os.WriteFile(path, []byte("x"), 0o644))
		require.NoError(t, os.Chtimes(path, time.Now().Add(-age), time.Now().Add(-age)))
	}
	write("rows-0123456789abcdef", 0)
	write(".sums-0123456789abcdef.77.part", 2*old)
	write(".rows-0123456789abcdef.78.part", 0) // somebody else may be at work
	write("notes.txt", 2*old)
	v := readyViewer(t, run)
	kept := names(t, cache)
	require.Len(t, kept, 4)
	require.Contains(t, kept, "notes.txt")
	require.Contains(t, kept, ".rows-0123456789abcdef.78.part")
	size := int64(0)
	for _, name := range append(v.plain.RowsNames(), sumsName(v.plain)) {
		info, err := os.Stat(filepath.Join(cache, name))
		require.NoError(t, err)
		size += info.Size()
	}
	require.Equal(t, v.CacheBytes(), size)
	require.Equal(t, size, v.Progress().Bytes)
	var p Progress
	answered(t, v, "/api/progress", &p)
	require.Equal(t, v.Progress(), p)

	before, err := os.Stat(v.sumsPath())
	require.NoError(t, err)
	again := readyViewer(t, run)
	after, err := os.Stat(again.sumsPath())
	require.NoError(t, err)
	require.Equal(t, before.ModTime(), after.ModTime())
}

// A combined cube keeps its runs beside itself.
func TestKeptOfACombinedCube(t *testing.T) {
	v := readyViewer(t, runFolder(t, "all"))
	require.Len(t, names(t, filepath.Join(v.dir, CacheFolder)), 4)
	require.NoDirExists(t, filepath.Join(runFolder(t, "run0"), CacheFolder))
	w := get(t, v, "/api/spectrum?"+spectrumCases[0].query)
	require.Equal(t, get(t, plainViewer(t, v.dir), "/api/spectrum?"+spectrumCases[0].query).Body.String(), w.Body.String())
}

// Where the run cannot be written the user's folder serves, else nothing is kept, and both
// are said; spectra are the same.
func TestKeptElsewhereOrNot(t *testing.T) {
	run := runCopy(t)
	// A file in the folder's place keeps root out too.
	require.NoError(t, os.WriteFile(filepath.Join(run, CacheFolder), nil, 0o644))
	user := t.TempDir()
	t.Setenv("XDG_CACHE_HOME", user)
	v := readyViewer(t, run)
	require.True(t, strings.HasPrefix(v.Progress().Folder, user), v.Progress().Folder)
	require.Contains(t, v.Progress().Note, "cannot be written")
	want := get(t, v, "/api/spectrum?"+spectrumCases[0].query).Body.String()

	nowhere := filepath.Join(t.TempDir(), "file")
	require.NoError(t, os.WriteFile(nowhere, nil, 0o644))
	t.Setenv("XDG_CACHE_HOME", nowhere)
	v, err := Open(t.Context(), run)
	require.NoError(t, err)
	defer v.Close()
	require.Equal(t, None, v.Progress().State)
	require.Contains(t, v.Progress().Note, "longer")
	require.Equal(t, want, get(t, v, "/api/spectrum?"+spectrumCases[0].query).Body.String())
}

// A byte that changes is seen when it is read: the answer comes from the cube, and what was
// kept goes.
func TestDamageIsSeen(t *testing.T) {
	run := runCopy(t)
	v := readyViewer(t, run)
	want := get(t, v, "/api/spectrum?"+spectrumCases[0].query).Body.String()
	path := filepath.Join(run, CacheFolder, v.plain.RowsNames()[0])
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	for i := range text[4096:] {
		text[4096+i] ^= 1
	}
	require.NoError(t, os.WriteFile(path, text, 0o600))
	fresh := readyViewer(t, run)
	require.NotNil(t, fresh.rows.Load())
	require.Equal(t, want, get(t, fresh, "/api/spectrum?"+spectrumCases[0].query).Body.String())
	require.Nil(t, fresh.rows.Load())
	require.Equal(t, None, fresh.Progress().State)
	require.Contains(t, fresh.Progress().Note, "damaged")
	require.NoFileExists(t, path)
}

// Serve answers on the loopback until its context ends, which interrupts what is being
// made as well.
func TestServe(t *testing.T) {
	run := runCopy(t)
	ctx, cancel := context.WithCancel(t.Context())
	v, err := Open(ctx, run)
	require.NoError(t, err)
	l, err := Listen(ctx, 0)
	require.NoError(t, err)
	require.True(t, strings.HasPrefix(l.Addr().String(), "127.0.0.1:"))
	ended := make(chan error, 1)
	go func() { ended <- Serve(ctx, l, v) }()
	answer, err := http.Get("http://" + l.Addr().String() + "/api/run")
	require.NoError(t, err)
	text, err := io.ReadAll(answer.Body)
	require.NoError(t, err)
	require.NoError(t, answer.Body.Close())
	require.Equal(t, http.StatusOK, answer.StatusCode, string(text))
	_, err = Listen(ctx, l.Addr().(*net.TCPAddr).Port)
	require.Error(t, err)
	cancel()
	select {
	case err := <-ended:
		require.NoError(t, err)
	case <-time.After(10 * time.Second):
		t.Fatal("the server does not end")
	}
	require.NoError(t, v.Close())
	for _, name := range names(t, filepath.Join(run, CacheFolder)) {
		require.False(t, strings.HasPrefix(name, "."), "no part is left: %s", name)
	}
}

// Opening goes on when ctx has ended: nothing is made, nothing is left.
func TestCancelledBeforeItBegan(t *testing.T) {
	run := runCopy(t)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	v, err := Open(ctx, run)
	require.NoError(t, err)
	require.NoError(t, v.Close())
	require.Empty(t, names(t, filepath.Join(run, CacheFolder)))
}
