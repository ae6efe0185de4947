package fitsutil

import (
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

// unfinishedCube is a cube of two images, of which rows are written in strips.
type unfinishedCube struct {
	images []ImageSpec
	signal []float32 // [plane][row][column]
	flags  []int16
}

const (
	leftColumns = 5
	leftRows    = 7
	leftPlanes  = 3
)

func newUnfinishedCube() *unfinishedCube {
	u := &unfinishedCube{images: []ImageSpec{
		{Name: "SIGNAL", BITPIX: -32, Axes: []int{leftColumns, leftRows, leftPlanes}},
		{Name: "FLAGS", BITPIX: 16, Axes: []int{leftColumns, leftRows, leftPlanes}},
	}}
	rng := rand.New(rand.NewPCG(1, 2))
	for range leftColumns * leftRows * leftPlanes {
		u.signal = append(u.signal, rng.Float32()-0.5)
		u.flags = append(u.flags, int16(rng.Int()))
	}
	return u
}

// write writes rows y0..y1-1 of both images.
func (u *unfinishedCube) write(t *testing.T, c *Cube, y0, y1 int) {
	t.Helper()
	for l := range leftPlanes {
		from, to := (l*leftRows+y0)*leftColumns, (l*leftRows+y1)*leftColumns
		require.NoError(t, c.WriteStrip(0, y0, y1-y0, l, 1, u.signal[from:to]))
		require.NoError(t, c.WriteStrip(1, y0, y1-y0, l, 1, u.flags[from:to]))
	}
}

// finish appends a table and commits.
func (u *unfinishedCube) finish(t *testing.T, c *Cube) {
	t.Helper()
	require.NoError(t, c.AppendTable(&Table{Name: "T", Columns: []Column{{Name: "A", Format: "J", Data: []int32{1, 2}}}}))
	require.NoError(t, c.Commit())
}

// whole is the file of a cube that was never interrupted.
func (u *unfinishedCube) whole(t *testing.T) []byte {
	t.Helper()
	path := filepath.Join(t.TempDir(), "c.fits")
	c, err := CreateCube(path, NewHeader(), u.images)
	require.NoError(t, err)
	u.write(t, c, 0, leftRows)
	u.finish(t, c)
	data, err := os.ReadFile(path)
	require.NoError(t, err)
	return data
}

// progress is what a cube tells of the first rows.
func progress(c *Cube, rows int) []ImageProgress {
	var all []ImageProgress
	for _, sum := range c.Sums() {
		all = append(all, ImageProgress{Rows: rows, Sum: sum})
	}
	return all
}

// A cube that is left after any row, also with rows, tables or its name beyond what was
// recorded, becomes the same file.
func TestReopenedCubeIsTheSame(t *testing.T) {
	u := newUnfinishedCube()
	want := u.whole(t)
	for rows := range leftRows + 1 {
		for _, beyond := range []string{"", "rows", "committed"} {
			path := filepath.Join(t.TempDir(), "c.fits")
			c, err := CreateCube(path, NewHeader(), u.images)
			require.NoError(t, err)
			if rows > 0 {
				u.write(t, c, 0, rows)
			}
			require.NoError(t, c.Flush())
			done, file := progress(c, rows), c.Unfinished()
			switch beyond {
			case "":
				require.NoError(t, c.Suspend())
				require.Empty(t, c.Unfinished())
			case "rows":
				if rows < leftRows {
					u.write(t, c, rows, rows+1)
				}
				require.NoError(t, c.Suspend())
			case "committed":
				if rows < leftRows {
					u.write(t, c, rows, leftRows)
				}
				u.finish(t, c)
				require.NoFileExists(t, file)
			}
			again, err := ReopenCube(path, file, NewHeader(), u.images, done)
			require.NoError(t, err)
			if rows < leftRows {
				u.write(t, again, rows, leftRows)
			}
			u.finish(t, again)
			got, err := os.ReadFile(path)
			require.NoError(t, err)
			require.True(t, string(want) == string(got), "%d rows, beyond %q", rows, beyond)
			require.Len(t, listDir(t, filepath.Dir(path)), 1)
		}
	}
}

func listDir(t *testing.T, dir string) []os.DirEntry {
	t.Helper()
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	return entries
}

// A row that is done may not be written again, and one that is not must be.
func TestReopenedCubeKnowsItsRows(t *testing.T) {
	u := newUnfinishedCube()
	path := filepath.Join(t.TempDir(), "c.fits")
	c, err := CreateCube(path, NewHeader(), u.images)
	require.NoError(t, err)
	u.write(t, c, 0, 3)
	done, file := progress(c, 3), c.Unfinished()
	require.NoError(t, c.Suspend())
	c, err = ReopenCube(path, file, NewHeader(), u.images, done)
	require.NoError(t, err)
	require.ErrorIs(t, c.WriteStrip(0, 2, 1, 0, 1, u.signal[:leftColumns]), ErrRange)
	require.NoError(t, c.Suspend())
	c, err = ReopenCube(path, file, NewHeader(), u.images, done)
	require.NoError(t, err)
	require.ErrorIs(t, c.Commit(), ErrRange)
}

// A file that is not what was recorded is refused, and stays as it is.
func TestReopenRefusesOtherFiles(t *testing.T) {
	u := newUnfinishedCube()
	for name, change := range map[string]func(t *testing.T, file string, done []ImageProgress){
		"deleted": func(t *testing.T, file string, _ []ImageProgress) { require.NoError(t, os.Remove(file)) },
		"cut": func(t *testing.T, file string, _ []ImageProgress) {
			require.NoError(t, os.Truncate(file, 3000))
		},
		"a byte": func(t *testing.T, file string, _ []ImageProgress) {
			data, err := os.ReadFile(file)
			require.NoError(t, err)
			// The second HDU begins at 2880, its data at 5760.
			data[5760+11] ^= 0x10
			require.NoError(t, os.WriteFile(file, data, 0o644))
		},
		"fewer rows": func(_ *testing.T, _ string, done []ImageProgress) { done[0].Rows-- },
		"no rows":    func(_ *testing.T, _ string, done []ImageProgress) { done[1].Rows = 0 },
		"too many":   func(_ *testing.T, _ string, done []ImageProgress) { done[1].Rows = leftRows + 1 },
		"a sum":      func(_ *testing.T, _ string, done []ImageProgress) { done[1].Sum++ },
	} {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "c.fits")
			c, err := CreateCube(path, NewHeader(), u.images)
			require.NoError(t, err)
			u.write(t, c, 0, 3)
			done, file := progress(c, 3), c.Unfinished()
			require.NoError(t, c.Suspend())
			change(t, file, done)
			before, readErr := os.ReadFile(file)
			_, err = ReopenCube(path, file, NewHeader(), u.images, done)
			require.ErrorIs(t, err, ErrNotAsLeft)
			require.ErrorContains(t, err, path)
			after, afterErr := os.ReadFile(file)
			require.Equal(t, readErr == nil, afterErr == nil)
			require.Equal(t, before, after)
		})
	}
	path := filepath.Join(t.TempDir(), "c.fits")
	for _, file := range []string{path, "/elsewhere/.c.fits.0.part", ""} {
		_, err := ReopenCube(path, file, NewHeader(), u.images, nil)
		require.ErrorIs(t, err, ErrNotAsLeft)
	}
}
