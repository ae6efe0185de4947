package pair

import (
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// Every fault of a whole night ends the run with one sentence that names the
// file and the cure.
func TestRefusals(t *testing.T) {
	seq := smallSequence(t)
	every := func(edit func(f *shot)) func(t *testing.T) string {
		return func(t *testing.T) string {
			shots := takeNight(seq)
			for _, f := range shots {
				edit(f)
			}
			return writeNight(t, shots)
		}
	}
	for _, c := range []struct {
		name  string
		night func(t *testing.T) string
		file  string // the end of what the error names
		parts []string
	}{
		{"no folder", func(t *testing.T) string { return filepath.Join(t.TempDir(), "gone") }, "gone", []string{"there is no such folder"}},
		{"a file", func(t *testing.T) string {
			path := filepath.Join(t.TempDir(), "night")
			require.NoError(t, os.WriteFile(path, nil, 0o644))
			return path
		}, "night", []string{"a file, not a folder"}},
		{"empty", func(t *testing.T) string { return t.TempDir() }, "", []string{"the night is empty", "subfolders are not read"}},
		{"frames in a subfolder, hidden or by a folder's link", func(t *testing.T) string {
			dir := t.TempDir()
			require.NoError(t, os.MkdirAll(filepath.Join(dir, "sub.fits"), 0o755))
			takeNight(seq)[6].write(t, filepath.Join(dir, "sub.fits", "f.fits"))
			takeNight(seq)[6].write(t, filepath.Join(dir, ".f.fits"))
			require.NoError(t, os.Symlink("sub.fits", filepath.Join(dir, "link.fits")))
			return dir
		}, "", []string{"the night is empty"}},
		{"tile-compressed", func(t *testing.T) string {
			dir := t.TempDir()
			require.NoError(t, os.WriteFile(filepath.Join(dir, "f.fits.fz"), nil, 0o644))
			return dir
		}, "", []string{"tile-compressed", "funpack"}},
		{"all unreadable", every(func(f *shot) { f.bytes = []byte("SIMPLE") }), "f00001.fits", []string{"none of the night's 13 frames can be read", "the telescope"}},
		{"another instrument", every(func(f *shot) { f.set(t, "INSTRUME", "other") }), "f00001.fits", []string{`INSTRUME is "other"`, `"optical"`}},
		{"another size", every(func(f *shot) { f.axes = []int{8, 6} }), "f00001.fits", []string{"8 x 6 pixels, not 12 x 6"}},
		{"no science frame", func(t *testing.T) string {
			shots := takeNight(seq)
			return writeNight(t, append(shots[:firstScience-1:firstScience-1], shots[stepOffB-1:]...))
		}, "", []string{"none of its 6 frames serves a science step"}},
		{"another sequence", every(func(f *shot) { f.set(t, "MASKID", "0123456789abcdef") }), "",
			[]string{"none of its 13 frames serves a science step", "f00001.fits is wrong-mask", "the night of this sequence"}},
		{"words that the profile does not know", every(func(f *shot) { f.set(t, "KIND", "LIGHT") }), "", []string{`KIND is "LIGHT"`, "keywords and kinds"}},
		{"nothing but times", every(func(f *shot) {
			for _, k := range []string{"STEP", "MASKID", "KIND"} {
				f.header.Delete(k)
			}
		}), "", []string{"neither STEP nor MASKID nor KIND"}},
		{"no STEP, no MASKID, a frame short", func(t *testing.T) string {
			shots := takeNight(seq)[1+firstScience:]
			for _, f := range shots {
				f.header.Delete("STEP")
				f.header.Delete("MASKID")
			}
			return writeNight(t, shots)
		}, "", []string{"5 frames for 7 different steps", "write STEP or MASKID"}},
		{"no STEP, no MASKID, equal times", every(func(f *shot) {
			f.header.Delete("STEP")
			f.header.Delete("MASKID")
			f.set(t, "DATE-OBS", dateOf(0))
		}), "", []string{"DATE-OBS is missing or the same"}},
	} {
		t.Run(c.name, func(t *testing.T) {
			dir := c.night(t)
			n, err := Run(t.Context(), seq, Options{Night: dir}, nil)
			require.Nil(t, n)
			var e *Error
			require.ErrorAs(t, err, &e)
			require.True(t, strings.HasPrefix(e.File, dir) && strings.HasSuffix(e.File, c.file), e.File)
			require.NotEmpty(t, e.Cure)
			require.NotContains(t, err.Error(), "\n")
			for _, part := range c.parts {
				require.Contains(t, err.Error(), part)
			}
		})
	}
}

func TestForbiddenFolder(t *testing.T) {
	err := folderError("night", &fs.PathError{Op: "open", Path: "night", Err: fs.ErrPermission})
	require.ErrorIs(t, err, fs.ErrPermission)
	require.Contains(t, err.Error(), "chmod +rx")
}

// A frame that may not be read is one unreadable frame, not the end.
func TestDanglingLink(t *testing.T) {
	seq := smallSequence(t)
	dir := writeNight(t, takeNight(seq))
	require.NoError(t, os.Symlink("nowhere", filepath.Join(dir, "link.fits")))
	n, err := Run(t.Context(), seq, Options{Night: dir}, nil)
	require.NoError(t, err)
	last := n.Ledger[len(n.Ledger)-1]
	require.Equal(t, "link.fits", last.File)
	require.Equal(t, "unreadable", string(last.Verdict))
	require.NotContains(t, last.Note, dir)
}
