package fitsutil

import (
	"bufio"
	"errors"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"github.com/stretchr/testify/require"
)

// onlyFile fails unless the folder holds this one file with this content.
func onlyFile(t *testing.T, path, content string) {
	t.Helper()
	entries, err := os.ReadDir(filepath.Dir(path))
	require.NoError(t, err)
	require.Len(t, entries, 1)
	got, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Equal(t, content, string(got))
}

func writeText(text string) func(io.Writer) error {
	return func(w io.Writer) error {
		_, err := io.WriteString(w, text)
		return err
	}
}

func TestWriteAtomicReplacesWhole(t *testing.T) {
	path := filepath.Join(t.TempDir(), "ledger.csv")
	require.NoError(t, WriteAtomic(path, writeText("old")))
	onlyFile(t, path, "old")
	require.NoError(t, WriteAtomic(path, writeText("new")))
	onlyFile(t, path, "new")
	info, err := os.Stat(path)
	require.NoError(t, err)
	require.NotZero(t, info.Mode()&0o044, "a product is not private: the umask of tests is 022 or laxer")
}

func TestWriteAtomicInCurrentFolder(t *testing.T) {
	t.Chdir(t.TempDir())
	require.NoError(t, WriteAtomic("plain.txt", writeText("here")))
	path, err := filepath.Abs("plain.txt")
	require.NoError(t, err)
	onlyFile(t, path, "here")
}

func TestWriteAtomicFailureKeepsOld(t *testing.T) {
	path := filepath.Join(t.TempDir(), "ledger.csv")
	require.NoError(t, WriteAtomic(path, writeText("old")))
	cause := errors.New("the cause")
	err := WriteAtomic(path, func(w io.Writer) error {
		if _, err := w.Write(make([]byte, 1<<20)); err != nil {
			return err
		}
		return cause
	})
	require.ErrorIs(t, err, cause)
	var typed *Error
	require.ErrorAs(t, err, &typed)
	require.Equal(t, path, typed.File)
	onlyFile(t, path, "old")

	own := &Error{File: "frame.fits", HDU: 3, Offset: none, What: "broken", Err: ErrStructure}
	require.Equal(t, error(own), WriteAtomic(path, func(io.Writer) error { return own }))
	onlyFile(t, path, "old")
}

func TestWriteAtomicBadPaths(t *testing.T) {
	folder := t.TempDir()
	file := filepath.Join(folder, "file")
	require.NoError(t, os.WriteFile(file, []byte("old"), 0o644))
	cases := map[string]struct {
		path string
		want error
	}{
		"folder missing":   {filepath.Join(folder, "none", "x"), fs.ErrNotExist},
		"file as folder":   {filepath.Join(file, "x"), syscall.ENOTDIR},
		"target is folder": {folder, syscall.EISDIR},
		"name too long":    {filepath.Join(folder, strings.Repeat("x", 250)), syscall.ENAMETOOLONG},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			err := WriteAtomic(c.path, writeText("new"))
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, c.path, typed.File)
			require.NotEmpty(t, typed.Cure)
			require.ErrorIs(t, err, c.want)
			onlyFile(t, file, "old")
		})
	}
}

func TestWriteAtomicWithoutPermission(t *testing.T) {
	if os.Geteuid() == 0 {
		// Root may write anywhere: the mapping of the cause is checked alone.
		err := writeError("x", &fs.PathError{Op: "open", Path: "x", Err: syscall.EACCES}, "cannot be created")
		requireCure(t, err, "x", fs.ErrPermission)
		return
	}
	folder := t.TempDir()
	require.NoError(t, os.Chmod(folder, 0o555))
	path := filepath.Join(folder, "x")
	requireCure(t, WriteAtomic(path, writeText("new")), path, fs.ErrPermission)
}

func requireCure(t *testing.T, err error, path string, want error) {
	t.Helper()
	require.ErrorIs(t, err, want)
	var typed *Error
	require.ErrorAs(t, err, &typed)
	require.Equal(t, path, typed.File)
	require.NotEmpty(t, typed.Cure)
}

// killedWriter is the body of a subprocess that TestKilledWriterKeepsOld kills.
const killedWriterPath = "FITSUTIL_TEST_KILLED_WRITER"

func TestMain(m *testing.M) {
	if path := os.Getenv(killedWriterPath); path != "" {
		waitInsideWrite(path)
	}
	os.Exit(m.Run())
}

// waitInsideWrite writes half a file or half a cube, says so and waits.
func waitInsideWrite(path string) {
	half := func() {
		os.Stdout.WriteString("half\n")
		io.Copy(io.Discard, os.Stdin)
	}
	if filepath.Ext(path) == ".fits" {
		cube, err := CreateCube(path, nil, []ImageSpec{{BITPIX: -32, Axes: []int{100, 100}}})
		if err == nil {
			err = cube.WriteStrip(0, 0, 50, 0, 1, make([]float32, 5000))
		}
		if err != nil {
			panic(err)
		}
		half()
	}
	err := WriteAtomic(path, func(w io.Writer) error {
		w.Write(make([]byte, 1<<20))
		half()
		return nil
	})
	panic(err)
}

func TestKilledWriterKeepsOld(t *testing.T) {
	for _, name := range []string{"ledger.csv", "cube.fits"} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), name)
			require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
			cmd := exec.Command(os.Args[0], "-test.run=^$")
			cmd.Env = append(os.Environ(), killedWriterPath+"="+path)
			stdout, err := cmd.StdoutPipe()
			require.NoError(t, err)
			_, err = cmd.StdinPipe() // open, so that the writer waits
			require.NoError(t, err)
			require.NoError(t, cmd.Start())
			line, err := bufio.NewReader(stdout).ReadString('\n')
			require.NoError(t, err)
			require.Equal(t, "half\n", line)
			require.NoError(t, cmd.Process.Kill())
			require.Error(t, cmd.Wait())

			got, err := os.ReadFile(path)
			require.NoError(t, err)
			require.Equal(t, "old", string(got))
			// What a kill leaves beside it is no product by its name.
			left, err := filepath.Glob(filepath.Join(filepath.Dir(path), "*"))
			require.NoError(t, err)
			hidden, err := filepath.Glob(filepath.Join(filepath.Dir(path), ".*.part"))
			require.NoError(t, err)
			require.Equal(t, []string{path}, withoutHidden(left))
			require.Len(t, hidden, 1)
			// The next run writes as if nothing had been.
			require.NoError(t, WriteAtomic(path, writeText("new")))
		})
	}
}

func withoutHidden(paths []string) []string {
	var kept []string
	for _, p := range paths {
		if filepath.Base(p)[0] != '.' {
			kept = append(kept, p)
		}
	}
	return kept
}
