package main

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"path/filepath"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// The tiny night: made once a test run by the commands themselves, from
// testdata/tiny, and copied by whoever needs it.
var (
	tinyOnce sync.Once
	tinyDir  string
	errTiny  error
)

// tinyNight is a folder with profile.yaml, target.yaml, scene.yaml, seq/ and
// night/. It is shared: copy it before changing anything.
func tinyNight(root string) (string, error) {
	tinyOnce.Do(func() {
		tinyDir, errTiny = os.MkdirTemp("", "mirrorloom-tiny")
		if errTiny == nil {
			errTiny = makeTiny(filepath.Join(root, "testdata", "tiny"))
		}
	})
	return tinyDir, errTiny
}

func makeTiny(from string) error {
	for _, name := range []string{"profile.yaml", "target.yaml", "scene.yaml"} {
		text, err := os.ReadFile(filepath.Join(from, name))
		if err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(tinyDir, name), text, 0o644); err != nil {
			return err
		}
	}
	in := func(name string) string { return filepath.Join(tinyDir, name) }
	for _, args := range [][]string{
		{"plan", in("target.yaml"), "--profile", in("profile.yaml"), "-o", in("seq")},
		{"rehearse", in("seq"), "--scene", in("scene.yaml"), "--seed", "1", "--perfect", "-o", in("night")},
	} {
		var stdout, stderr bytes.Buffer
		if code := run(context.Background(), args, &stdout, &stderr); code != exitWhole {
			return fmt.Errorf("%s: exit code %d: %s", args[0], code, stderr.String())
		}
	}
	return nil
}

// tiny copies the tiny night into a folder of the test's own.
func tiny(t *testing.T) string {
	t.Helper()
	from, err := tinyNight(outside.Root(t))
	require.NoError(t, err)
	dir := t.TempDir()
	require.NoError(t, os.CopyFS(dir, os.DirFS(from)))
	return dir
}
