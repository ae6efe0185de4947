package rowfile

import (
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

var layout = Layout{Identity: "abc", Rows: 5, Sections: []Section{{"LIGHT", 3, 40}, {"FLAGS", 7, 6}, {"SUM", 1, 8}}}

// written writes a file of random bytes and gives them by row and section.
func written(t *testing.T, path string) [][][]byte {
	t.Helper()
	random := rand.New(rand.NewPCG(1, 2))
	w, err := Create(path, layout)
	require.NoError(t, err)
	var all [][][]byte
	for range layout.Rows {
		var row [][]byte
		for _, s := range layout.Sections {
			part := make([]byte, s.Records*s.Bytes)
			for i := range part {
				part[i] = byte(random.Uint32())
			}
			row = append(row, part)
		}
		require.NoError(t, w.WriteRow(row...))
		all = append(all, row)
	}
	require.NoFileExists(t, path, "a file appears when it is whole")
	require.NoError(t, w.Commit())
	require.NoError(t, w.Abort())
	return all
}

// readAll reads every run of records there is; an error ends it.
func readAll(t *testing.T, f *File, want [][][]byte) error {
	t.Helper()
	for y, row := range want {
		for i, s := range layout.Sections {
			for first := range s.Records {
				for count := range s.Records - first + 1 {
					got := make([]byte, count*s.Bytes)
					if err := f.ReadRecords(got, y, i, first, count); err != nil {
						return err
					}
					require.Equal(t, row[i][first*s.Bytes:(first+count)*s.Bytes], got)
				}
			}
		}
	}
	return nil
}

func TestRecordsComeBack(t *testing.T) {
	path := filepath.Join(t.TempDir(), "rows")
	want := written(t, path)
	info, err := os.Stat(path)
	require.NoError(t, err)
	require.Equal(t, layout.Size(), info.Size())
	f, err := Open(path, layout)
	require.NoError(t, err)
	defer f.Close()
	require.NoError(t, readAll(t, f, want))
	require.NoError(t, readAll(t, f, want))
}

// Whatever byte changes, what is read is what was written, or an error.
func TestEveryByteIsGuarded(t *testing.T) {
	path := filepath.Join(t.TempDir(), "rows")
	want := written(t, path)
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	used := 0
	for i := range text {
		if i >= 200 && i < headBytes {
			require.Zero(t, text[i], "the head is filled up with zeros, which nobody reads")
			continue
		}
		text[i] ^= 1 << (i % 8)
		require.NoError(t, os.WriteFile(path, text, 0o600))
		text[i] ^= 1 << (i % 8)
		f, err := Open(path, layout)
		if err == nil {
			err = readAll(t, f, want)
			require.NoError(t, f.Close())
		}
		if i >= headBytes {
			require.ErrorIs(t, err, ErrDamaged, "byte %d", i)
			used++
		}
	}
	require.Equal(t, int(layout.Size())-headBytes, used)
}

func TestOtherFilesAreRefused(t *testing.T) {
	path := filepath.Join(t.TempDir(), "rows")
	written(t, path)
	for _, other := range []Layout{
		{"abd", layout.Rows, layout.Sections},
		{layout.Identity, layout.Rows + 1, layout.Sections},
		{layout.Identity, layout.Rows, layout.Sections[:2]},
	} {
		_, err := Open(path, other)
		require.ErrorIs(t, err, ErrOther)
	}
	require.NoError(t, os.Truncate(path, layout.Size()-1))
	_, err := Open(path, layout)
	require.ErrorIs(t, err, ErrDamaged)
	require.NoError(t, os.Truncate(path, 17))
	_, err = Open(path, layout)
	require.ErrorIs(t, err, ErrDamaged)
	require.NoError(t, os.WriteFile(path, make([]byte, layout.Size()), 0o600))
	_, err = Open(path, layout)
	require.ErrorIs(t, err, ErrOther)
	_, err = Open(filepath.Join(t.TempDir(), "none"), layout)
	require.ErrorIs(t, err, os.ErrNotExist)
}

func TestAbortLeavesNothing(t *testing.T) {
	dir := t.TempDir()
	w, err := Create(filepath.Join(dir, "rows"), layout)
	require.NoError(t, err)
	require.NoError(t, w.Abort())
	left, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.Empty(t, left)
	_, err = Create(filepath.Join(dir, "none", "rows"), layout)
	require.Error(t, err)
}
