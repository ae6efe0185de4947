package fitsutil

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

// A card gets another value before the commit, its comment and the sums stay right.
func TestCubeRevise(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a.fits")
	h := NewHeader(Card{"CRVAL1", 1.5, "where"}, Card{"LONG", "one line is not enough for this text, which goes on and on until it is at its end", ""})
	c, err := CreateCube(path, nil, []ImageSpec{{Name: "A", Header: h, BITPIX: 16, Axes: []int{2, 1}}})
	require.NoError(t, err)
	defer c.Abort()
	require.NoError(t, c.WriteStrip(0, 0, 1, 0, 1, []int16{7, 8}))
	require.NoError(t, c.Revise(0, "CRVAL1", 123.456789012345678))
	for _, wrong := range []struct {
		hdu   int
		key   string
		value any
	}{{1, "CRVAL1", 2.0}, {0, "CRVAL2", 2.0}, {0, "NAXIS1", 3}, {0, "LONG", "short"}, {0, "CRVAL1", struct{}{}},
		{0, "CRVAL1", "one line is not enough for this text, which goes on and on until it is at its end"}} {
		require.Error(t, c.Revise(wrong.hdu, wrong.key, wrong.value), "%v", wrong)
	}
	require.NoError(t, c.Commit())
	require.ErrorIs(t, c.Revise(0, "CRVAL1", 2.0), ErrClosed)
	f, err := Open(path)
	require.NoError(t, err)
	defer f.Close() // only read from
	im, err := f.ImageNamed("A")
	require.NoError(t, err)
	x, err := im.Header.Float("CRVAL1")
	require.NoError(t, err)
	require.Equal(t, 123.456789012345678, x)
	for _, card := range im.Header.Cards() {
		if card.Key == "CRVAL1" {
			require.Equal(t, "where", card.Comment)
		}
	}
	requireSums(t, path)
}
