package view

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"sync"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/combine"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// host is what the tests ask.
const host = "127.0.0.1:40123"

// shared is a folder for what all tests read: made once, removed at the end.
var shared string

func TestMain(m *testing.M) {
	var err error
	if shared, err = os.MkdirTemp("", "mirrorloom-view"); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	code := m.Run()
	os.RemoveAll(shared) // a folder in the system's place for such
	os.Exit(code)
}

// made are two nights of the tiny field, run0 and run1, and all, combined of both.
var made = sync.OnceValue(func() error {
	opts := combine.Options{Out: filepath.Join(shared, "all")}
	for i := range 2 {
		field, err := trial.Tiny()
		if err != nil {
			return err
		}
		// Small voxels, so that there are more groups of planes than one.
		field.Profile.Grid.StepNM, field.Profile.Grid.Count = field.Profile.Grid.StepNM*0.82, 20
		field = field.Displaced(float64(2*i), float64(i))
		night, err := field.Plan(context.Background(), filepath.Join(shared, fmt.Sprint("night", i)))
		if err != nil {
			return err
		}
		if err := night.Rehearse(context.Background(), trial.Noisy, rehearse.Options{Seed: 5 + uint64(i), NoTruth: true}); err != nil {
			return err
		}
		recipe, err := reduce.LoadRecipe("nominal")
		if err != nil {
			return err
		}
		if _, err := night.Reduce(context.Background(), trial.Noisy, reduce.Options{Cube: true, Recipe: recipe}); err != nil {
			return err
		}
		run := filepath.Join(shared, fmt.Sprint("run", i))
		if err := os.Rename(night.Run(trial.Noisy), run); err != nil {
			return err
		}
		opts.Runs = append(opts.Runs, run)
	}
	if err := os.Mkdir(opts.Out, 0o755); err != nil {
		return err
	}
	_, err := combine.Run(context.Background(), opts)
	return err
})

// runFolder is one of them. Nothing in it is to be changed.
func runFolder(t testing.TB, name string) string {
	t.Helper()
	require.NoError(t, made())
	return filepath.Join(shared, name)
}

// runCopy is one that may be.
func runCopy(t testing.TB) string {
	t.Helper()
	dir := t.TempDir()
	require.NoError(t, os.CopyFS(dir, os.DirFS(runFolder(t, "run0"))))
	return dir
}

// plainViewer keeps nothing.
func plainViewer(t testing.TB, run string) *Viewer {
	t.Helper()
	v, err := open(run)
	require.NoError(t, err)
	v.folder = newFolder("", "")
	t.Cleanup(func() { require.NoError(t, v.Close()) })
	return v
}

// readyViewer has made what is kept.
func readyViewer(t testing.TB, run string) *Viewer {
	t.Helper()
	v, err := Open(t.Context(), run)
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, v.Close()) })
	settled(t, v)
	require.Equal(t, Ready, v.Progress().State, v.Progress().Note)
	return v
}

// settled waits until nothing is made any more.
func settled(t testing.TB, v *Viewer) {
	t.Helper()
	require.Eventually(t, func() bool { return v.Progress().State != Making }, 2*time.Minute, 5*time.Millisecond)
}

// get asks for a path with its query.
func get(t testing.TB, v *Viewer, target string) *httptest.ResponseRecorder {
	t.Helper()
	r := httptest.NewRequest(http.MethodGet, target, nil)
	r.Host = host
	w := httptest.NewRecorder()
	v.Handler(host).ServeHTTP(w, r)
	return w
}

// answered is get's JSON.
func answered(t testing.TB, v *Viewer, target string, to any) {
	t.Helper()
	w := get(t, v, target)
	require.Equal(t, http.StatusOK, w.Code, w.Body.String())
	require.NoError(t, json.Unmarshal(w.Body.Bytes(), to))
}
