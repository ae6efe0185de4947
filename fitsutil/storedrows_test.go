package fitsutil

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

// Pieces of stored rows are what ReadSection gives, whatever rows were read before; what is
// held is not read again, and what is not held is refused.
func TestStoredRows(t *testing.T) {
	const columns, rows = 23, 11
	data := make([]uint16, columns*rows)
	for i := range data {
		data[i] = uint16(i * 2503)
	}
	path := filepath.Join(t.TempDir(), "f.fits")
	require.NoError(t, WriteFile(path, nil, &ImageData{Axes: []int{columns, rows}, Data: data}))
	f, err := Open(path)
	require.NoError(t, err)
	defer f.Close()
	im, err := f.FirstImage()
	require.NoError(t, err)
	require.Equal(t, 2*columns, im.RowBytes())

	var s StoredRows
	require.ErrorIs(t, s.Convert(make([]float32, 1), 0, 0), ErrRange)
	for _, span := range [][2]int{{2, 9}, {3, 8}, {0, 4}, {10, 11}, {0, 11}} {
		require.NoError(t, s.Read(im, span[0], span[1]))
		for y := span[0]; y < span[1]; y++ {
			for x0 := range columns {
				got, want := make([]float32, columns-x0), make([]float32, columns-x0)
				require.NoError(t, s.Convert(got, x0, y))
				require.NoError(t, im.ReadSection(want, x0, columns, y, y+1))
				require.Equal(t, want, got, "row %d from column %d", y, x0)
			}
		}
	}
	require.ErrorIs(t, s.Convert(make([]float32, 2), columns-1, 3), ErrRange)
	require.ErrorIs(t, s.Convert(make([]float32, 1), 0, rows), ErrRange)
	require.ErrorIs(t, s.Read(im, 5, rows+1), ErrRange)
	require.ErrorIs(t, s.Convert(make([]float32, 1), 0, 5), ErrRange, "nothing is held after an error")

	require.NoError(t, s.Read(im, 2, 9))
	require.NoError(t, f.Close())
	require.NoError(t, s.Read(im, 3, 8), "held already")
	require.ErrorIs(t, s.Read(im, 0, 1), ErrClosed)
}
